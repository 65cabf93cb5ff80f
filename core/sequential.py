"""Sequential plans from two risks: Wald's lines, cut off at a greatest number of items."""

from __future__ import annotations

from bisect import bisect_left
from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.lines import MOST_ITEMS, SequentialRule, Truncated, wald_lines
from steelyard.core.need import need_from
from steelyard.core.numbers import read_whole
from steelyard.core.plan import Plan
from steelyard.core.questions import size
from steelyard.core.smallest import plan_for

_BY_DEFAULT = 2  # times the single plan for the same risks; common practice, from 1.5 to 3, no source


def sequential_plan(claim: Any, alpha: Any, catch: Any, power: Any, stop_at: Any = None) -> Plan:
    """Return the sequential plan with Wald's lines for two risks.

    The lines keep the two risks roughly, so the plan's own, which are exact, differ from them. Where
    inspection is cut off, the lot passes up to the smallest count that keeps alpha: with it the power is the
    greatest.

    Parameters
    ----------
    claim : float, int or str
        A rate as typed, above 0.
    alpha, catch, power : float or str
        As in `steelyard.core.smallest.smallest_plan`; the rate to catch lies between the claim and 1.
    stop_at : int, optional
        The most items to inspect; left out: twice the single plan for the same risks.

    Raises
    ------
    InvalidValue
        When a value is refused.

    Examples
    --------
    >>> import steelyard.core.kinds
    >>> from steelyard.core.questions import power
    >>> plan = sequential_plan("1%", "5%", "10%", "90%")
    >>> plan.design.sequential, plan.rule.last, round(size(plan), 4), round(power(plan, "10%"), 4)
    (104, 3, 0.0244, 0.9006)
    """
    need = need_from("binomial", claim, alpha, catch, power)
    low, high = need.claim.value, need.catches[0]
    if need.claim.side != "above" or low == 0:
        raise InvalidValue("claim", "be of the form p<=0.02, above 0, for a sequential plan", str(need.claim))
    if high == 1:
        raise InvalidValue("catch", "be less than 1", catch)
    most = _BY_DEFAULT * plan_for(need).design.n if stop_at is None else stop_at
    design = Truncated(read_whole(most, "stop_at", 1, MOST_ITEMS))
    lines = wald_lines(low, need.alpha, high, need.power)

    def plan(last: int) -> Plan:
        rule = SequentialRule(*lines, last)
        rule.check(design.sequential)
        return Plan("sequential binomial", design, rule, need.claim, need.alpha)

    least, first_too_many = SequentialRule(*lines, 0).numbers(design.sequential)
    ends = range(max(least, 0), min(first_too_many, design.sequential))
    place = bisect_left(ends, True, key=lambda last: size(plan(last)) <= need.alpha)
    return plan(ends[min(place, len(ends) - 1)])
