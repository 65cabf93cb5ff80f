"""Exact confidence limits: the tests of all rates, inverted.

A limit is the least or the greatest rate in ``{rate: p-value(x) > 1 - confidence}``, with the p-value of
`steelyard.core.splits`. One-sided and with split ``half`` these are the limits of Clopper and Pearson (for
Poisson counts Garwood's), with ``nearest`` the mid-P limits. With ``rarest`` the set may have holes: it
jumps at the rates where two counts are equally probable, so these are scanned from far outside inwards.

`miss` stands for 1 - confidence throughout.

References
----------
C. J. Clopper and E. S. Pearson, Biometrika 26 (1934), 404-413; F. Garwood, Biometrika 28 (1936), 437-442
(both from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.core.parameter import Columns, Floats
from steelyard.core.splits import ONE_SIDED, Tail, Truth, opposite, tails_of, weigh, within

if TYPE_CHECKING:
    from steelyard.core.law import CountLaw, RateLaw

Row = Mapping[str, Any]

_OWN = {"lower": ("high", "low", 1.0), "upper": ("low", "high", -1.0)}
_CLOSE = 1e-8  # relative step from which on Newton's method must get better with every step
_TIE = 1e-12
_TINY = 1e-300
_POINTS = 32


def rate_limit(law: RateLaw, row: Row, x: float, end: str, miss: float, split: str) -> float:
    """Return a limit for a rate that may take any value.

    Parameters
    ----------
    law : RateLaw
    row : mapping
        The fields of one design.
    x : float
        The count found.
    end : {"lower", "upper"}
    miss : float
        1 - confidence, strictly between 0 and 1.
    split : {"one-sided", "half", "nearest", "rarest"}

    Examples
    --------
    >>> from steelyard.core.kinds.binomial import BINOMIAL
    >>> round(rate_limit(BINOMIAL.law, {"n": 20}, 4, "upper", 0.1, "half"), 5)
    0.40103
    """
    columns = dict(row)
    own, _, _ = _OWN[end]
    if end == "lower" and x == 0:
        return 0.0
    if end == "upper" and x == law.most(columns):
        return law.greatest_rate
    if split == "rarest":
        return _rarest(law, columns, x, end, miss)
    if split == "nearest":
        start = law.tail_rate(x, columns, own, miss)
        tails = tails_of(law, columns, np.asarray(start), np.asarray(x), own, split)
        return _solve(law, columns, tails, miss, start, 0.0, law.greatest_rate)
    return _one_sided(law, columns, x, own, miss if split == ONE_SIDED else miss / 2)


def lot_limit(
    law: CountLaw, row: Row, x: float, end: str, miss: float, split: str, reach: tuple[float, float]
) -> float:
    """Return a limit for the number of defectives in a lot, a whole number; ties are decided exactly.

    Parameters are those of `rate_limit`, and with them

    reach : tuple of float
        The least and the greatest number of defectives with which the count may be found.

    Examples
    --------
    >>> from steelyard.core.kinds.hypergeometric import HYPERGEOMETRIC
    >>> lot_limit(HYPERGEOMETRIC.law, {"lot": 60, "n": 32}, 0, "upper", 0.05, "one-sided", (0, 28))
    3.0
    """
    columns, (own, _, inwards) = dict(row), _OWN[end]
    outermost = reach[0] if end == "lower" else reach[1]
    span = reach[1] - reach[0]

    def possible(distance: Floats, bound: float, split: str) -> Truth:
        count = outermost + inwards * np.minimum(distance, span)
        tails = tails_of(law, columns, count, np.asarray(x), own, split)
        return ~within(law, columns, count, tails, bound) | (distance >= span)

    if split != "rarest":
        return outermost + inwards * _first(lambda distance: possible(distance, miss, split), span)
    outside = miss / _most_times(row["n"] / 4)
    start = _first(lambda distance: possible(distance, outside, ONE_SIDED), span)
    for length in (64 * 2**k for k in range(64)):  # longer and longer stretches, so that it ends soon
        stretch = start + np.arange(length)
        found = possible(stretch, miss, split)
        if found.any():
            return float(outermost + inwards * stretch[found.argmax()])
        start += length
    raise AssertionError("unreachable: the far end is possible")


def bisected_limit(
    law: CountLaw, row: Row, x: float, end: str, miss: float, split: str, greatest_rate: float
) -> float:
    """Return a limit for a rate whose tails are monotone, but have no simple slope.

    Parameters are those of `rate_limit`, and with them

    greatest_rate : float
        The end of the rates, which may be infinite.
    """
    columns, (own, _, _) = dict(row), _OWN[end]
    if end == "lower" and x == 0:
        return 0.0
    if end == "upper" and x == law.most(columns):
        return greatest_rate

    def beyond(rate: float) -> bool:
        at, count = np.asarray(rate), np.asarray(x)
        possible = weigh(law, columns, at, tails_of(law, columns, at, count, own, split)) > miss
        return bool(possible) == (end == "lower")

    low, high = 0.0, min(greatest_rate, 1.0)
    while not beyond(high):
        low, high = high, 2 * high
    while low < (middle := (low + high) / 2) < high:
        low, high = (low, middle) if beyond(middle) else (middle, high)
    return high if end == "lower" else low


def _first(predicate: Callable[[Floats], Truth], last: float) -> float:
    """Return the first whole number from 0 to `last` where a monotone predicate is true, as it is at `last`.

    Like bisection, but many points in each round: one call for many costs little more than one for one.
    """
    below, above = -1.0, last
    while above - below > 1:
        points = np.arange(below + 1, above, max(1.0, (above - below) // _POINTS))
        found = predicate(points)
        place = int(found.argmax())
        if not found[place]:
            below = float(points[-1])
        else:
            below, above = float(points[place - 1]) if place else below, float(points[place])
    return above


def _one_sided(law: RateLaw, columns: Columns, x: float, own: str, miss: float) -> float:
    """Return the rate where the own tail is `miss`, by whichever tail is the smaller."""
    start = law.tail_rate(x, columns, own, miss)
    if miss <= 0.5:
        return _solve(law, columns, [(1, own, np.asarray(x))], miss, start, 0.0, law.greatest_rate)
    rest, beside = ("low", x - 1) if own == "high" else ("high", x + 1)
    return _solve(law, columns, [(1, rest, np.asarray(beside))], 1.0 - miss, start, 0.0, law.greatest_rate)


def _solve(
    law: RateLaw,
    columns: Columns,
    tails: list[Tail],
    target: float,
    start: float,
    low: float,
    high: float,
) -> float:
    """Return the rate between `low` and `high` where a weighted sum of tails crosses the target.

    Newton's method on the logarithm of the sum, held inside a bracket.
    """
    rate, rising, last = max(start, _TINY), tails[0][1] == "high", math.inf
    for _ in range(200):
        value, slope = (float(part(law, columns, np.asarray(rate), tails)) for part in (weigh, _slope))
        if (value > target) == rising:
            high = rate
        else:
            low = rate
        new = rate - value * math.log(value / target) / slope if value > 0 and slope != 0 else math.nan
        step = abs(new - rate)
        if step == 0 or (step <= _CLOSE * rate and step > 0.9 * last):  # no longer better: rounding
            return new
        if not low < new < high:
            new = (low + high) / 2 if math.isfinite(high) else 2 * rate
        rate, last = new, step
    return rate


def _slope(law: RateLaw, columns: Columns, rate: Floats, tails: list[Tail]) -> Floats:
    """Return the derivative by the rate: that of P(X >= x) is ``x P(X = x) / rate`` for every rate law."""
    total = np.zeros(())
    for weight, end, x in tails:
        first, sign = (x, 1) if end == "high" else (x + 1, -1)
        total = total + sign * weight * first * law.exactly(first, columns, rate) / rate
    return total


def _rarest(law: RateLaw, columns: Columns, x: float, end: str, miss: float) -> float:
    """Scan the rates where `x` and a count of the other tail are equally probable, from outside inwards.

    Between two of them the evidence has no inner maximum: it falls, then rises, or does one of both.
    """
    own, other, inwards = _OWN[end]
    near, far = law.tail_rate(x, columns, own, miss), _outside(law, columns, x, own, miss)
    count, bounds = np.asarray(x), np.array([far, near])
    first, last = opposite(law, columns, bounds, count, -inwards)
    last = min(last + 1, x - 1) if end == "lower" else max(last - 1, x + 1)
    others = np.arange(first + inwards, last + inwards, inwards)
    rates = law.even_rate(x, others, columns)
    before = weigh(law, columns, rates, [(1, own, count), (1, other, others - inwards)])
    after = weigh(law, columns, rates, tails := [(1, own, count), (1, other, others)])
    slope, alone = (_slope(law, columns, rates, part) for part in (tails, tails[:1]))
    rises = inwards * slope > -_TIE * np.abs(alone)
    tied = np.abs(after - miss) <= _TIE * miss  # then the rate itself is outside, and what follows decides
    place = int((tied & rises | (after > miss) & ~tied).argmax())
    if before[place] <= miss * (1 + _TIE):
        return float(rates[place])
    outer, inner = float(rates[place - 1]) if place else far, float(rates[place])
    tails = [(1, own, count), (1, other, others[place] - inwards)]
    return _solve(law, columns, tails, miss, (outer + inner) / 2, *sorted((outer, inner)))


def _outside(law: RateLaw, columns: Columns, x: float, own: str, miss: float) -> float:
    """Return a rate beyond which the two tails together stay below `miss`."""
    times, rate = 1.0, law.tail_rate(x, columns, own, miss)
    while (needed := _most_times(law.variance(columns, rate))) > times:
        times = 2 * needed
        rate = law.tail_rate(x, columns, own, miss / times)
    return rate


def _most_times(variance: float) -> float:
    """Return how many times the own tail both tails can be together under split ``rarest``.

    The other tail is at most its nearest count's probability divided by that of the mode, because the
    laws are log-concave; the mode of a whole number has at least the probability 1/sqrt(1 + 12 variance).
    """
    return 1.0 + math.sqrt(1.0 + 12.0 * variance)
