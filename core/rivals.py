"""Plans as rivals: which is the most powerful at a rate, and where two power curves cross."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import kind_of
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan
from steelyard.core.questions import power
from steelyard.core.rates import DOWNWARDS, UPWARDS, check_one_rate, claims_both_sides, halve, rates_for

_EQUAL = 1e-12
_SMALL = 10.0 ** np.arange(-9, -2)
_GRID = np.concatenate([_SMALL, np.arange(0.01, 1, 0.01), 1 - _SMALL[::-1]])


def best(plans: Sequence[Plan], rate: object) -> Plan:
    """Return the most powerful plan at a rate; of equals, to 12 digits, the smaller sample, then the first.

    Parameters
    ----------
    plans : sequence of Plan
        All about the same parameter.
    rate : float, int or str
        As typed.

    Raises
    ------
    InvalidValue
        When the plans' parameters differ.
    """
    _same_parameter(plans)
    powers = [power(plan, rate) for plan in plans]
    equal = [plan for plan, found in zip(plans, powers, strict=True) if found >= max(powers) * (1 - _EQUAL)]
    return min(equal, key=_extent)


def _extent(plan: Plan) -> float:
    value = getattr(plan.design, kind_of(plan).grammar.extent, 0.0)
    return float(value) if isinstance(value, int | float) else 0.0


def crossing(plan_a: Plan, plan_b: Plan) -> list[float]:
    """Return the rates at which the power curves of two plans cross, in rising order.

    The curves are compared at the rates where either reaches powers from 1e-9 to 1 - 1e-9, so the search
    looks closely where they bend; each change of sign is then halved down to neighbouring numbers. In a
    finite lot the rate is the first whole number of defectives at which the order has changed.

    Raises
    ------
    InvalidValue
        When the plans' parameters, or the lots they are about, differ.
    NoAnswer
        When one plan is at least as powerful throughout.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plans = [read_plan(f"binomial | {text}") for text in ("n 50 | reject x>=4", "n 20 | reject x>=2")]
    >>> [round(rate, 4) for rate in crossing(*plans)]
    [0.0567]
    """
    plans = (plan_a, plan_b)
    _same_parameter(plans)
    _same_lot(plans)
    for plan in plans:
        check_one_rate(plan)
    whole = kind_of(plan_a).parameters[0].whole
    grid = np.unique(np.concatenate([_landmarks(plan) for plan in plans]))
    signs = _ahead(plans, grid)
    kept = signs != 0
    grid, signs = grid[kept], signs[kept]
    turns = np.flatnonzero(signs[1:] != signs[:-1])
    if not turns.size:
        message = "the two power curves do not cross: one is at least as high throughout"
        raise NoAnswer(message)
    before = signs[turns]
    found = halve(lambda rates: _ahead(plans, rates) == -before, grid[turns], grid[turns + 1], whole)
    return [float(rate) for rate in found]


def _landmarks(plan: Plan) -> Floats:
    ends = (DOWNWARDS, UPWARDS) if claims_both_sides(plan) else (None,)
    found: Floats = np.concatenate([rates_for([plan], list(_GRID), end)[0] for end in ends])
    return found[np.isfinite(found)]


def _ahead(plans: Sequence[Plan], rates: Floats) -> Floats:
    """Return the sign of the first plan's power minus the second's, from whichever tail is small."""
    kinds = [kind_of(plan) for plan in plans]
    columns = [kind.columns([plan]) for kind, plan in zip(kinds, plans, strict=True)]
    safe = [kind.parameters[0].convert(rates, own) for kind, own in zip(kinds, columns, strict=True)]
    first, second = (kind.reject(own, rate) for kind, own, rate in zip(kinds, columns, safe, strict=True))
    missed, let = (kind.accept(own, rate) for kind, own, rate in zip(kinds, columns, safe, strict=True))
    difference = np.where(first < 0.5, first - second, let - missed)
    size_of_it = np.where(first < 0.5, first + second, let + missed)
    return np.where(np.abs(difference) <= _EQUAL * size_of_it, 0.0, np.sign(difference))


def _same_parameter(plans: Sequence[Plan]) -> None:
    symbols = list(dict.fromkeys(kind_of(plan).parameters[0].symbol for plan in plans))
    if len(symbols) > 1:
        raise InvalidValue("plans", "be about the same parameter", " and ".join(symbols))


def _same_lot(plans: Sequence[Plan]) -> None:
    """Refuse to compare numbers of defectives in lots of different sizes."""
    reaches = [kind_of(plan).parameters[0].reach(plan.design) for plan in plans]
    if len(set(reaches)) > 1:
        raise InvalidValue(
            "plans", "be about lots of one size", " and ".join(f"{most:g}" for _, most in reaches)
        )
