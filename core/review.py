"""What a reader must be told of a plan: whether its rule is the one that its alpha gives, and in words."""

from __future__ import annotations

import dataclasses
import math

from steelyard.core.abilities import Remarking
from steelyard.core.errors import SteelyardError
from steelyard.core.kind import claim_of, kind_of
from steelyard.core.parameter import show_rate
from steelyard.core.plan import Plan, same_rule
from steelyard.core.questions import region, size
from steelyard.core.rates import rates_for
from steelyard.core.regions import critical_region, empty_tails

_CLAIMED = {"<=": "at most", ">=": "at least", "=": "exactly"}
_GOALS = (0.5, 0.9, 0.95)
_MORE = 1e-9  # relative; rounding of a measured critical value gives less
NOT_PROOF = "Not rejecting a claim does not prove it; a sample proves no lot free of defects."


def check(plan: Plan) -> str:
    """Return ``"ok"``, or what is unusual about the plan: its size, or a rule that alpha would not give.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> check(read_plan("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"))
    'ok'
    >>> check(read_plan("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=5"))
    'size 0.321 %; alpha 5 % would give x ≥ 4'
    """
    if plan.claim is None or plan.alpha is None:
        return "ok"
    actual, given = size(plan), _given_by_alpha(plan)
    notes = []
    if given is not None and not same_rule(given, plan.rule):
        other = region(dataclasses.replace(plan, rule=given))
        notes.append(f"size {show_rate(actual)}; alpha {show_rate(plan.alpha)} would give {other}")
    elif actual > plan.alpha * (1 + _MORE):
        notes.append(f"size {show_rate(actual)} exceeds alpha {show_rate(plan.alpha)}")
    notes += [str(tail) for tail in empty_tails(plan)]
    return "; ".join(notes) or "ok"


def _given_by_alpha(plan: Plan) -> object | None:
    if plan.claim is None or plan.alpha is None:
        return None
    try:
        found: object = critical_region(kind_of(plan), plan.design, plan.claim, plan.alpha, plan.split)
    except SteelyardError:
        return None
    return found


def sentences(plan: Plan) -> list[str]:
    """Return the plan as sentences for a report, each at most 255 characters.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> print(sentences(read_plan("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"))[1])
    Claim: defect rate at most 2 %.
    """
    told = [sample_sentence(plan)]
    if plan.claim is not None:
        told += [claim_sentence(plan), rule_sentence(plan), *_risks(plan)]
        told += [text for text in (_shown(plan), _reach(plan), _note(plan)) if text]
    else:
        told.append(rule_sentence(plan))
    kind = kind_of(plan)
    remarks = kind.remarks(plan) if isinstance(kind, Remarking) else []
    return [*told, *remarks, NOT_PROOF]


def sample_sentence(plan: Plan) -> str:
    """Return the instruction at the bench."""
    values = {
        field.attribute: getattr(plan.design, field.attribute) for field in kind_of(plan).grammar.fields
    }
    fields = {name: _filled_in(value) for name, value in values.items()}
    return kind_of(plan).grammar.wording.sample.format_map(fields)


def _filled_in(value: object) -> str:
    """Return a number, or one for each of two samples, as an instruction shows it."""
    if isinstance(value, tuple):
        return " and ".join(map(_filled_in, value))
    return f"{value:g}" if isinstance(value, int | float) else str(value)


def _bound(plan: Plan) -> str:
    """Return what the claim compares its parameter with: a value, or the other sample's parameter."""
    kind, claim = kind_of(plan), claim_of(plan)
    shown = {parameter.symbol: parameter for parameter in kind.parameters}
    if not claim.reference:
        return str(shown[claim.symbol].show(claim.value, bare=True))
    margin = shown[claim.symbol].show(abs(claim.value), bare=True)
    shift = f" {'plus' if claim.value > 0 else 'minus'} {margin}" if claim.value else ""
    return f"the {shown[claim.reference].name}{shift}"


def _subject(plan: Plan) -> str:
    names = {parameter.symbol: parameter.name for parameter in kind_of(plan).parameters}
    return names[claim_of(plan).symbol]


def claim_sentence(plan: Plan) -> str:
    """Return the claim in words."""
    if plan.claim is None:
        return "The plan carries no claim."
    parts = [dataclasses.replace(plan, claim=part) for part in plan.claim.parts]
    told = [f"{_subject(part)} {_CLAIMED[claim_of(part).relation]} {_bound(part)}" for part in parts]
    return f"Claim: {', and '.join(told)}."


def rule_sentence(plan: Plan) -> str:
    """Return the decision rule as the inspector reads it."""
    fate, other = ("fails", "passes") if plan.verdict == "fail" else ("passes", "fails")
    when = kind_of(plan).told(plan)
    return f"Rule: the claim is rejected, and the lot {fate}, on {when}; otherwise the lot {other}."


def _risks(plan: Plan) -> list[str]:
    actual = show_rate(size(plan))
    nominal = "" if plan.alpha is None else f" (nominal alpha {show_rate(plan.alpha)})"
    return [
        f"Type I error: while the claim is true it is rejected with probability {actual} at most{nominal}."
    ]


def _shown(plan: Plan) -> str:
    """Return what a passing lot has shown, for plans that demonstrate something by rejecting a claim."""
    claim = plan.claim
    if plan.verdict != "pass" or claim is None or claim.side == "either":
        return ""
    confidence = show_rate(1.0 - size(plan))
    bound = f"{'below' if claim.side == 'below' else 'above'} {_bound(plan)}"
    return f"A lot that passes has shown, with confidence {confidence}: {_subject(plan)} {bound}."


def _reach(plan: Plan) -> str:
    """Return the rates at which the power is 50, 90 and 95 %, for plans that reject at one end."""
    parameter, found = kind_of(plan).parameters[0], rates_for([plan], _GOALS)[0]
    if not all(map(math.isfinite, found)):
        return ""
    shown = (parameter.show(float(rate), bare=True) for rate in found)
    told = ", ".join(f"{show_rate(goal)} at {rate}" for goal, rate in zip(_GOALS, shown, strict=True))
    return f"Power reaches {told} ({parameter.name})."


def _note(plan: Plan) -> str:
    found = check(plan)
    return "" if found == "ok" else f"Note: {found}."
