"""What anybody may ask a plan: power, beta, acceptance, size, critical values.

Every question goes through the face of a kind, so it holds for every kind of plan. Rates are taken as
typed: numbers or text such as ``"5%"``.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from steelyard.core.errors import InvalidValue, NoAnswer, shown
from steelyard.core.kind import claim_of, kind_of
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan, Reject


def _rates(plan: Plan, rates: tuple[Any, ...]) -> list[Floats]:
    kind = kind_of(plan)
    needed, most = kind.takes(plan)
    parameters = kind.parameters[:most]
    given = [rate for rate in rates if rate is not None]
    if not needed <= len(given) <= len(parameters):
        names = " and ".join(parameter.symbol for parameter in parameters)
        rule = f"be given for {names}" if len(given) < needed else f"be given only for {names}"
        raise InvalidValue("rates" if needed > 1 else "rate", rule, ", ".join(map(shown, given)))
    read = [p.read(value, plan.design) for p, value in zip(parameters, given, strict=False)]
    kind.check_rates(*read)
    return [np.array([value]) for value in read]


def power(plan: Plan, *rates: Any) -> float:
    """Return the probability that the plan rejects its claim.

    Parameters
    ----------
    plan : Plan
    *rates : float, int or str
        The true parameter, in its own unit (proportion between 0 and 1, defects per unit, defectives in
        the lot …); kinds with a second parameter take it as well.

    Raises
    ------
    InvalidValue
        When a rate is outside its range.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> round(power(read_plan("binomial | n 50 | reject x>=4"), "10%"), 4)
    0.7497
    """
    kind = kind_of(plan)
    return float(kind.reject(kind.columns([plan]), *_rates(plan, rates))[0])


def not_rejected(plan: Plan, *rates: Any) -> float:
    """Return the probability that the plan does not reject its claim, accurate where it is small."""
    kind = kind_of(plan)
    return float(kind.accept(kind.columns([plan]), *_rates(plan, rates))[0])


def beta(plan: Plan, *rates: Any) -> float:
    """Return the type II error: the probability of not rejecting a claim that is false.

    Raises
    ------
    NoAnswer
        Where the claim is true, so that no type II error is possible.
    """
    claim = claim_of(plan)
    values = [float(rate[0]) for rate in _rates(plan, rates)]
    if claim.holds(*values):
        where = " and ".join(shown(rate) for rate in rates if rate is not None)
        message = f"beta has no meaning here: the claim {claim} is true at {where}; see SY_ACCEPTANCE"
        raise NoAnswer(message)
    return not_rejected(plan, *rates)


def acceptance(plan: Plan, *rates: Any) -> float:
    """Return the probability that the lot passes: the operating characteristic.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> shown = read_plan("binomial | n 59 | claim p>=0.05 | reject x<=0 | verdict pass")
    >>> round(acceptance(shown, 0.05), 4), round(acceptance(shown, 0.001), 3)
    (0.0485, 0.943)
    """
    return not_rejected(plan, *rates) if plan.verdict == "fail" else power(plan, *rates)


def size(plan: Plan) -> float:
    """Return the actual size: the largest power over the claim.

    Raises
    ------
    InvalidValue
        When the plan has no claim.
    """
    return kind_of(plan).size(plan)


def critical(plan: Plan, end: str | None = None) -> float:
    """Return the critical value: the first that rejects, looking from the values that do not.

    Parameters
    ----------
    plan : Plan
        A plan that compares one statistic with limits.
    end : {"lower", "upper"}, optional
        Which end; needed where the plan rejects at both.

    Raises
    ------
    InvalidValue
        When the end is missing or the plan does not reject there.
    """
    rule = plan.rule
    if not isinstance(rule, Reject):
        return kind_of(plan).critical_value(plan)
    if end is None:
        if rule.low is not None and rule.high is not None:
            raise InvalidValue("end", "be lower or upper for a plan that rejects at both ends", None)
        end = "upper" if rule.low is None else "lower"
    value = rule.high if end == "upper" else rule.low
    if value is None:
        message = f"the plan rejects nothing at the {end} end"
        raise NoAnswer(message)
    return value


def region(plan: Plan) -> str:
    """Return the critical region in words and signs, e.g. ``"x ≥ 4"``.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> region(read_plan("binomial | n 80 | reject x<=30 or x>=50"))
    'x ≤ 30 or x ≥ 50'
    """
    return kind_of(plan).region(plan)
