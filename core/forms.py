"""Forms of a plan: the same decision rule under further circumstances, such as imperfect inspection.

A kind of plan may have forms, kinds of their own with more fields. A form keeps the counts of the rule;
what they then amount to, and which counts would keep alpha, the questions answer.
"""

from __future__ import annotations

import dataclasses
from typing import Any

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import KINDS, claim_of, kind_of
from steelyard.core.need import need_of
from steelyard.core.plan import Plan
from steelyard.core.regions import make_plan
from steelyard.core.smallest import plan_for


def plain(plan: Plan) -> Plan:
    """Return a plan without the fields of its form; other plans as they are.

    Examples
    --------
    >>> from steelyard.core.text import read_plan, write_plan
    >>> write_plan(plain(read_plan("binomial | n 50 | misses 0.1 | reject x>=4")))
    'binomial | n 50 | reject x>=4'
    """
    base = kind_of(plan).grammar.base
    if not base:
        return plan
    grammar = KINDS[base].grammar
    fields = {field.attribute: getattr(plan.design, field.attribute) for field in grammar.fields}
    return dataclasses.replace(plan, kind=base, design=grammar.design(**fields))


def with_fields(plan: Plan, marker: str, **values: Any) -> Plan:
    """Return a plan with the same counts, in the form that has a field.

    Parameters
    ----------
    plan : Plan
        Of a kind that has the form; fields of another form are given up.
    marker : str
        The field's word, e.g. ``"misses"``.
    **values
        The form's fields, by their attributes.

    Raises
    ------
    NoAnswer
        When the kind has no such form.
    InvalidValue
        When a value is refused.

    Examples
    --------
    >>> from steelyard.core.text import read_plan, write_plan
    >>> plan = read_plan("binomial | n 50 | claim p<=0.02 | reject x>=4")
    >>> write_plan(with_fields(plan, "misses", misses=0.1, false_alarms=0.01))
    'binomial | n 50 | claim p<=0.02 | misses 0.1 | false-alarms 0.01 | reject x>=4'
    """
    base = plain(plan)
    for kind in KINDS.values():
        grammar = kind.grammar
        if grammar.base == base.kind and grammar.marker == marker:
            fields = {name: getattr(base.design, name) for name in _attributes(base)}
            changed = dataclasses.replace(base, kind=grammar.kind, design=grammar.design(**fields, **values))
            kind.verify(changed)
            return changed
    message = f"a plan of kind {base.kind} has no form with the field {marker}"
    raise NoAnswer(message)


def _attributes(plan: Plan) -> list[str]:
    return [field.attribute for field in kind_of(plan).grammar.fields]


def keeping_alpha(plan: Plan) -> Plan:
    """Return the plan with the rule that its claim and alpha give, for the same sample.

    Raises
    ------
    InvalidValue
        When the plan has no claim or no alpha, or no rule keeps it.

    Examples
    --------
    >>> from steelyard.core.text import read_plan, write_plan
    >>> text = "binomial | n 50 | claim p<=2% | alpha 5% | misses 0.1 | false-alarms 0.01 | reject x>=4"
    >>> write_plan(keeping_alpha(read_plan(text)))
    'binomial | n 50 | claim p<=0.02 | alpha 0.05 | misses 0.1 | false-alarms 0.01 | reject x>=5'
    """
    return make_plan(plan.kind, plan.design, claim_of(plan), alpha_of(plan), plan.split, plan.verdict)


def resized(plan: Plan, catch: Any, power: Any, lasting: bool = False) -> Plan:
    """Return the smallest plan of the same form, claim and alpha that reaches a power.

    Parameters
    ----------
    plan : Plan
        Its claim, alpha, split, verdict and the fields of its form are kept; its amount is not.
    catch, power
        See `steelyard.core.need.need_from`.
    lasting : bool
        See `steelyard.core.smallest.smallest_plan`.

    Examples
    --------
    >>> from steelyard.core.text import read_plan, write_plan
    >>> text = "binomial | n 50 | claim p<=1% | alpha 5% | misses 0.1 | reject x>=3"
    >>> write_plan(resized(read_plan(text), "5%", "90%"))
    'binomial | n 147 | claim p<=0.01 | alpha 0.05 | misses 0.1 | reject x>=4'
    """
    return plan_for(need_of(plan, catch, power, alpha_of(plan)), lasting, plan.verdict)


def alpha_of(plan: Plan) -> float:
    """Return the plan's alpha; refuse with one sentence where a rule came without."""
    if plan.alpha is None:
        raise InvalidValue("alpha", "be written in the plan for this question", None, "e.g. alpha 0.05")
    return plan.alpha
