"""From a power back to rates: where a plan's power reaches a target.

The search halves the range of floating-point numbers between two ends, so it ends at neighbouring numbers
at any scale, from ppm to thousands, and needs nothing of a kind but that its power is monotone there.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import Kind, claim_of, kind_of
from steelyard.core.numbers import read_choice, read_probability, typed, write_number
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Plan, Reject
from steelyard.core.questions import power
from steelyard.core.regions import design_row
from steelyard.core.splits import compare, doubt
from steelyard.core.threshold import CountKind
from steelyard.core.two_sided import region_tails

_DOUBLINGS, _HALVINGS = 80, 64
_FAR, _NEAR_NOTHING = 2.0**30, 2.0**-30
UPWARDS, DOWNWARDS = "upper", "lower"

Truth = NDArray[np.bool_]


def rate_for(plan: Plan, target: float, end: str | None = None) -> float:
    """Return the rate at which a plan's power reaches a target.

    Parameters
    ----------
    plan : Plan
        Of a kind with one parameter.
    target : float
        A power, strictly between 0 and 1.
    end : {"lower", "upper"}, optional
        For two-sided plans: the rate below or above the claim, where power climbs from its valley.

    Returns
    -------
    float
        In the parameter's unit; the rate nearest to the claim at which the power is at least the target.
        In a finite lot the first whole number of defectives.

    Raises
    ------
    InvalidValue
        When the end is missing, or the plan does not reject there.
    NoAnswer
        When the power reaches the target nowhere, or everywhere, on that side.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plan = read_plan("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4")
    >>> round(rate_for(plan, 0.9), 6)
    0.128756
    """
    end, target = _end(plan, end), read_probability(target, "power")
    if claims_both_sides(plan) and target <= (least := power(plan, _anchor(plan))):
        where = "size" if plan.claim else "least power"
        raise InvalidValue("power", f"be greater than the plan's {where} {least:.6g}", target)
    found = float(rates_for([plan], [target], end)[0, 0])
    if np.isnan(found):
        message = f"the power reaches {write_number(target)} at no rate on this side"
        raise NoAnswer(message)
    return found


def rates_for(plans: Sequence[Plan], targets: Sequence[float], end: str | None = None) -> Floats:
    """Return the rates at which the power of many plans reaches many targets.

    Parameters
    ----------
    plans : sequence of Plan
        Of any kinds with one parameter.
    targets : sequence of float
        Powers, strictly between 0 and 1.
    end : {"lower", "upper"}, optional
        Taken from each plan's rule where it rejects at one end only.

    Returns
    -------
    ndarray of float, shape (len(plans), len(targets))
        NaN where a plan has no such rate.
    """
    result = np.full((len(plans), len(targets)), np.nan)
    groups: dict[tuple[str, str, bool], list[int]] = {}
    for place, plan in enumerate(plans):
        try:
            groups.setdefault((plan.kind, _end(plan, end), claims_both_sides(plan)), []).append(place)
        except (InvalidValue, NoAnswer):
            continue
    for (_, side, both), places in groups.items():
        chosen = [plans[place] for place in places]
        result[places] = _solve(chosen, np.array([targets], dtype=float), side, both)
    return result


def claims_both_sides(plan: Plan) -> bool:
    """Tell whether the plan rejects at both ends of its statistic."""
    return isinstance(plan.rule, Reject) and None not in (plan.rule.low, plan.rule.high)


def check_one_rate(plan: Plan) -> None:
    """Refuse a plan whose power depends on several parameters."""
    kind = kind_of(plan)
    if kind.takes(plan)[0] > 1:
        names = " and ".join(parameter.symbol for parameter in kind.parameters)
        message = f"the power of this plan depends on {names}, so no single rate answers this"
        raise NoAnswer(message)


def _end(plan: Plan, end: str | None) -> str:
    """Return on which side of the claim the power climbs."""
    check_one_rate(plan)
    if claims_both_sides(plan):
        if end is None:
            raise InvalidValue("end", "be lower or upper for a plan that rejects at both ends", None)
        _anchor(plan)
        return read_choice(end, "end", (DOWNWARDS, UPWARDS))
    own = _climb(plan)
    if end not in (None, own):
        raise InvalidValue("end", f"be {own}: the plan rejects nothing at the other end", end)
    return own


def _climb(plan: Plan) -> str:
    return UPWARDS if kind_of(plan).rises(plan) else DOWNWARDS


def _solve(plans: Sequence[Plan], targets: Floats, end: str, both: bool) -> Floats:
    kind = kind_of(plans[0])
    columns = {name: values[:, None] for name, values in kind.columns(plans).items()}

    missed = np.array([[float(1 - typed(target)) for target in targets[0]]])
    high = targets > 0.5  # there the chance of missing tells more digits

    def reached(rates: Floats) -> Truth:
        found = kind.reject(columns, rates)
        hit = np.where(high, kind.accept(columns, rates) <= missed if high.any() else False, found >= targets)
        close = np.abs(found - targets) <= doubt(targets)
        if isinstance(kind, CountKind) and kind.parameters[0].whole and close.any():
            tails = region_tails(columns["low"], columns["high"])
            hit = compare(kind.law, columns, rates, tails, targets) >= 0
        return hit

    shape = np.broadcast_shapes((len(plans), 1), targets.shape)
    anchors = np.array([[_anchor(plan)] for plan in plans]) if both else None
    inside, outside = _ends(kind, columns, plans, end, anchors)
    inside, outside = (np.broadcast_to(edge, shape).astype(float) for edge in (inside, outside))
    outside = _reach(kind, reached, inside, outside)
    fine = reached(outside) & (~reached(inside) | (not both))
    found = halve(reached, inside, outside, whole=kind.parameters[0].whole)
    return np.where(fine, found, np.nan)


def _anchor(plan: Plan) -> float:
    """Return a rate between the two at which a power is reached: the claim, or where the power is least."""
    kind = kind_of(plan)
    if plan.claim is None and isinstance(kind, CountKind):
        valley = kind.law.valley(design_row(kind, plan.design), plan.rule.low, plan.rule.high)
        if not math.isnan(valley):
            return valley
    return float(claim_of(plan).value)


def _ends(
    kind: Kind, columns: Columns, plans: Sequence[Plan], end: str, anchors: Floats | None
) -> tuple[Floats, Floats]:
    """Return where the power is least and where it is greatest; an infinite end is searched later."""
    parameter = kind.parameters[0]
    lower, upper = parameter.span(columns)
    middle = np.array([[_middle(plan)] for plan in plans])
    if parameter.lower_open:  # a standard deviation or a life of 0 is none
        lower = middle * _NEAR_NOTHING
    start, outside = (lower, upper) if end == UPWARDS else (upper, lower)
    far = np.maximum(1.0, np.abs(middle)) * _FAR  # on the claim's own side, where the power is least
    start = np.where(np.isfinite(start), start, middle - far if end == UPWARDS else middle + far)
    return start if anchors is None else anchors, np.asarray(outside, dtype=float)


def _middle(plan: Plan) -> float:
    if plan.claim is not None:
        return float(plan.claim.value)
    if not isinstance(plan.rule, Reject):
        return 0.0
    ends = [value for value in (plan.rule.low, plan.rule.high) if value is not None]
    return float(ends[0])


def _reach(kind: Kind, reached: Callable[[Floats], Truth], inside: Floats, outside: Floats) -> Floats:
    """Replace infinite outer ends by finite ones at which the power has reached its target."""
    if np.isfinite(outside).all():
        return outside
    sign, step = np.sign(outside), np.maximum(1.0, np.abs(inside)) * 2.0**-20
    far = np.where(np.isfinite(outside), outside, inside + sign * step)
    for _ in range(_DOUBLINGS):
        short = np.isinf(outside) & ~reached(far)
        if not short.any():
            break
        step = np.where(short, step * 2, step)
        far = np.where(short, inside + sign * step, far)
    return far


def halve(reached: Callable[[Floats], Truth], inside: Floats, outside: Floats, whole: bool) -> Floats:
    """Return the rates nearest to `inside` at which the target is reached, by halving the numbers between."""
    order, value = (_as_whole, _as_float) if whole else (_order, _value)
    near, far = order(inside), order(outside)
    for _ in range(_HALVINGS):
        middle = (near & far) + ((near ^ far) >> 1)  # their mean; a sum would pass 64 bits across zero
        hit = reached(value(middle))
        far, near = np.where(hit, middle, far), np.where(hit, near, middle)
        if (np.abs(far - near) <= 1).all():
            break
    return value(far)


def _as_whole(values: Floats) -> NDArray[np.int64]:
    return np.rint(values).astype(np.int64)


def _as_float(places: NDArray[np.int64]) -> Floats:
    return places.astype(float)


def _order(values: Floats) -> NDArray[np.int64]:
    """Return the place of each number among all floating-point numbers: halving it halves scales, too."""
    bits = np.ascontiguousarray(values).view(np.int64)
    return np.where(bits < 0, np.int64(-(2**63)) - bits, bits)


def _value(places: NDArray[np.int64]) -> Floats:
    bits = np.where(places < 0, np.int64(-(2**63)) - places, places)
    return bits.view(np.float64)
