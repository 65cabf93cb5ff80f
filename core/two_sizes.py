"""The smallest two samples that show a difference with a wanted power."""

from __future__ import annotations

import math
from typing import Any

from steelyard.core.comparing import ComparingKind, Pairing
from steelyard.core.designs import design_from, kind_named
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.numbers import read_choice, read_number, read_probability, typed, write_number
from steelyard.core.plan import SIDES, Plan
from steelyard.core.regions import make_plan

_MOST_RATIO = 100


def comparison(
    kind_name: str,
    values: dict[str, Any],
    side: str,
    alpha: float,
    split: str = "half",
    verdict: str = "fail",
) -> Plan:
    """Return the plan of two samples of given sizes.

    Parameters
    ----------
    kind_name, values, side, alpha, verdict : see `smallest_comparison`
        The values hold the sizes, too.
    split : {"half", "rarest"}
        The rule of a two-sided test.

    Examples
    --------
    >>> from steelyard.core.text import write_plan
    >>> write_plan(comparison("two binomial", {"n": (50, 60), "test": "boschloo"}, "above", 0.05))
    'two binomial | n 50 and 60 | claim p2<=p1 | alpha 0.05 | test boschloo'
    """
    kind = _comparing(kind_name)
    design = design_from(kind, kind.completed(values))
    return make_plan(kind.grammar.kind, design, kind.claimed(side), alpha, split, verdict)


def smallest_comparison(
    kind_name: str,
    values: dict[str, Any],
    rates: tuple[Any, Any],
    power: Any,
    alpha: Any = 0.05,
    side: str = "above",
    ratio: Any = 1,
    verdict: str = "fail",
) -> Plan:
    """Return the first plan with two samples that rejects its claim often enough at two true values.

    Parameters
    ----------
    kind_name : str
        A kind that compares two samples, e.g. ``"two binomial"``.
    values : dict
        The other numbers and words of its design, e.g. ``{"test": "boschloo"}``.
    rates : tuple
        The true values in the first and the second sample at which the power is wanted.
    power, alpha : float or str
        Probabilities as typed; the power is the greater.
    side : {"above", "below", "either"}
        Where the second value lies, seen from the first, when the claim is false.
    ratio : float
        The second sample as a multiple of the first, rounded up to whole items.
    verdict : {"fail", "pass"}
        What rejecting the claim means for the lot.

    Raises
    ------
    InvalidValue
        When a value is refused, or the claim is true at these rates.
    NoAnswer
        When no samples that are small enough reach the power.

    Examples
    --------
    >>> from steelyard.core.text import write_plan
    >>> found = smallest_comparison("two binomial", {"test": "fisher"}, ("10%", "50%"), 0.8)
    >>> write_plan(found)
    'two binomial | n 19 and 19 | claim p2<=p1 | alpha 0.05 | test fisher'
    """
    kind = _comparing(kind_name)
    level, target = read_probability(alpha, "alpha"), read_probability(power, "power")
    if target <= level:
        raise InvalidValue("power", "be greater than alpha", power)
    claim = kind.claimed(read_choice(side, "side", tuple(SIDES.values())))
    truth = [parameter.read(rate) for parameter, rate in zip(kind.parameters, rates, strict=True)]
    if claim.holds(*truth):
        raise InvalidValue("rates", f"make the claim {claim} false", " and ".join(map(write_number, truth)))
    share = read_number(ratio, "ratio")
    if not 1 / _MOST_RATIO <= share <= _MOST_RATIO:
        raise InvalidValue("ratio", f"lie between {1 / _MOST_RATIO} and {_MOST_RATIO}", ratio)

    def sized(first: int) -> Any:
        second = max(math.ceil(typed(share) * first), kind.grammar.least)
        return design_from(kind, {**kind.completed(values), kind.grammar.extent: (first, second)})

    most = min(kind.most, math.floor(kind.most / typed(share)))
    wanted = Pairing(sized, most, claim, level, tuple(truth), target)
    first = kind.smallest_first(wanted)
    if first is None:
        message = f"no samples of up to {kind.most} items have power {write_number(target)} there"
        raise NoAnswer(message)
    return make_plan(kind.grammar.kind, sized(first), claim, level, verdict=verdict)


def _comparing(name: str) -> ComparingKind:
    kind = kind_named(name)
    if not isinstance(kind, ComparingKind):
        message = f"a plan of kind {name} does not compare two samples; see SY_SMALLEST"
        raise NoAnswer(message)
    return kind
