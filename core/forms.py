"""Forms of a plan: the same decision rule under further circumstances, such as imperfect inspection.

A kind of plan may have forms, kinds of their own with more fields. A form keeps the counts of the rule;
what they then amount to, and which counts would keep alpha, the questions answer.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from typing import Any

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import KINDS, Field, Grammar, Wording, claim_of, kind_of
from steelyard.core.need import need_of
from steelyard.core.plan import Plan
from steelyard.core.regions import make_plan
from steelyard.core.smallest import plan_for


def form_of(
    grammar: Grammar, form: str, design: Callable[..., Any], fields: tuple[Field, ...], wording: Wording
) -> Grammar:
    """Return the grammar of a form of a kind.

    Parameters
    ----------
    grammar : Grammar
        Of the kind itself.
    form : str
        The word before the kind's name, e.g. ``"inspected"``.
    design : type
        The design with the form's fields.
    fields : tuple of Field
        What the form adds; the first one must be written, as the mark of the form.
    wording : Wording
    """
    place = grammar.order.index("split" if "split" in grammar.order else grammar.rules[0])
    return dataclasses.replace(
        grammar,
        kind=f"{form} {grammar.kind}",
        base=grammar.kind,
        marker=fields[0].word,
        design=design,
        fields=(*grammar.fields, *fields),
        order=(*grammar.order[:place], *(field.word for field in fields), *grammar.order[place:]),
        wording=wording,
    )


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
    return dataclasses.replace(plan, kind=base, design=grammar.design(**_fields(plan, grammar)))


def with_fields(plan: Plan, marker: str, **values: Any) -> Plan:
    """Return a plan with the same counts, in the form that has a field.

    Parameters
    ----------
    plan : Plan
        Of a kind that has the form, or of that form already: then with other values.
    marker : str
        The field's word, e.g. ``"misses"``.
    **values
        The form's fields, by their attributes, as typed.

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
    own = kind_of(plan).grammar
    base = plain(plan) if own.marker == marker else plan
    for kind in KINDS.values():
        grammar = kind.grammar
        if grammar.base == base.kind and grammar.marker == marker:
            added = {
                f.attribute: f.read(values[f.attribute], f.word)
                for f in grammar.fields
                if f.attribute in values
            }
            design = grammar.design(**_fields(base), **added)
            changed = dataclasses.replace(base, kind=grammar.kind, design=design)
            kind.verify(changed)
            return changed
    message = f"a plan of kind {base.kind} has no form with the field {marker}"
    raise NoAnswer(message)


def _fields(plan: Plan, grammar: Grammar | None = None) -> dict[str, Any]:
    """Return the values of a plan's design by name: all of them, or those that another grammar has."""
    fields = (grammar or kind_of(plan).grammar).fields
    return {field.attribute: getattr(plan.design, field.attribute) for field in fields}


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
