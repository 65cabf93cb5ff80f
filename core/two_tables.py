"""Two counts side by side: how strongly each pair of counts speaks, and which pairs reject.

All pairs ``(x1, x2)`` of two samples form a table. A test puts them in order, from the most extreme pair on:

- ``fisher``: by Fisher's conditional p-value, which is compared with alpha itself;
- ``z``: by the pooled z, whose normal p-value is compared with alpha;
- ``boschloo``, ``barnard``: in the order of ``fisher`` or ``z``, as far as the true size stays within alpha.

Order and ties are exact, in whole numbers. Where both samples have nothing but good items, or nothing but
bad ones, nothing is rejected. The size is the greatest chance to reject over all rates that the two samples
may share (the claim's boundary, where it is greatest: `convex`), certified by `steelyard.core.bernstein`.

Two-sided: split ``half`` rejects what either one-sided test rejects at alpha/2 (a p-value doubles the smaller
one); split ``rarest`` puts the pairs of both sides into one order, by the sum of all probabilities that are
not greater (Fisher), or by the size of z whatever its sign.

References
----------
R. A. Fisher, The Design of Experiments, 1935; R. D. Boschloo, Statistica Neerlandica 24 (1970), 1-35;
S. Suissa and J. J. Shuster, J. R. Statist. Soc. A 148 (1985), 317-327; G. A. Barnard, Biometrika 34 (1947),
123-138 (all from memory).
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Sequence
from fractions import Fraction
from functools import cached_property, lru_cache
from itertools import accumulate
from typing import Any

import numpy as np
from numpy.typing import NDArray

from steelyard.core.bernstein import greatest, stays_within
from steelyard.core.numbers import typed
from steelyard.core.parameter import Floats
from steelyard.core.pmf import binomial_pmf
from steelyard.core.splits import NEAR
from steelyard.core.tails import hypergeometric_at_least
from steelyard.core.tails_continuous import normal_at_least, normal_quantile

TESTS = ("fisher", "boschloo", "z", "barnard")
MOST_COMPARED = 200  # items of a sample: the largest table is worked out in less than a second
_ALPHA_BITS = 192

Table = NDArray[np.bool_]
Whole = NDArray[np.int64]


class Order(ABC):
    """All pairs of counts of two samples in the order in which they speak against a claim.

    Parameters
    ----------
    first, second : int
        Items of the two samples.
    both : bool
        Whether pairs of both sides stand in the order, or those with more in the second sample come first.
    """

    def __init__(self, first: int, second: int, both: bool) -> None:
        self.first, self.second, self.both = first, second, both
        x, y = np.indices((first + 1, second + 1))
        self.x, self.y, self.total = x, y, x + y

    @abstractmethod
    def keys(self) -> NDArray[Any]:
        """Return whole numbers, least for the most extreme pair, equal for equally extreme ones."""

    @abstractmethod
    def nominal(self, pair: tuple[int, int]) -> float:
        """Return the p-value of a pair before any look at the true size."""

    @abstractmethod
    def rejected(self, alpha: float) -> Table:
        """Return the pairs whose nominal p-value is at most alpha, decided exactly."""

    @cached_property
    def ranks(self) -> Whole:
        """The places of the pairs in the order, from 0; the last holds what is never rejected."""
        keys = self.keys().ravel().tolist()
        places = {key: place for place, key in enumerate(sorted(set(keys)))}
        return np.array([places[key] for key in keys]).reshape(self.total.shape)

    def up_to(self, rank: int) -> Table:
        """Return the pairs that are at least so extreme."""
        return self.ranks <= rank


class FisherOrder(Order):
    """By Fisher's p-value: the count of the second sample, given the total, is hypergeometric."""

    def keys(self) -> NDArray[Any]:
        """Return the p-values as fractions of one denominator, so large that different ones stay apart."""
        keys = np.empty(self.total.shape, dtype=object)
        for total in range(self.first + self.second + 1):
            ways = self._ways(total)
            every = sum(ways.values())
            tails = (_no_likelier if self.both else _beyond)(list(ways.values()))
            for j, tail in zip(ways, tails, strict=True):
                keys[total - j, j] = (tail << self._bits) // every
        keys[0, 0] = keys[-1, -1] = 1 << self._bits
        return keys

    def nominal(self, pair: tuple[int, int]) -> float:
        """Return Fisher's p-value."""
        if not self.both:
            return float(self._tails(*pair))
        ways = self._ways(sum(pair))
        return _no_likelier(list(ways.values()))[list(ways).index(pair[1])] / sum(ways.values())

    def rejected(self, alpha: float) -> Table:
        """Return the pairs with a small tail; one that is close to alpha is worked out exactly."""
        level = typed(alpha)
        if self.both:
            return np.asarray(self.keys() <= (level.numerator << self._bits) // level.denominator, dtype=bool)
        tails = self._tails(self.x, self.y)
        table = np.asarray(tails <= alpha)
        for x, y in np.argwhere(np.abs(tails - alpha) <= NEAR * alpha).tolist():
            ways = self._ways(x + y)
            table[x, y] = Fraction(sum(way for j, way in ways.items() if j >= y), sum(ways.values())) <= level
        return table

    @property
    def _bits(self) -> int:
        """How fine the keys are: beyond two of their denominators, or one and that of an alpha."""
        return 2 * (self.first + self.second) + _ALPHA_BITS

    def _tails(self, x: Any, y: Any) -> Floats:
        return hypergeometric_at_least(y, self.first + self.second, x + y, self.second)

    def _ways(self, total: int) -> dict[int, int]:
        """Return in how many ways a total comes about, by the count in the second sample."""
        counts = range(max(0, total - self.first), min(self.second, total) + 1)
        first, second = _choices(self.first), _choices(self.second)
        return {j: first[total - j] * second[j] for j in counts}


@lru_cache(maxsize=64)
def _choices(n: int) -> list[int]:
    return [math.comb(n, k) for k in range(n + 1)]


def _beyond(ways: Sequence[int]) -> list[int]:
    """Return the sums of each and all later ones."""
    return list(accumulate(reversed(ways)))[::-1]


def _no_likelier(ways: Sequence[int]) -> list[int]:
    """Return the sums of all that are no greater."""
    sums, rising = {}, sorted(ways)
    for way, reached in zip(rising, accumulate(rising), strict=True):
        sums[way] = reached
    return [sums[way] for way in ways]


class PooledOrder(Order):
    """By the difference of the two shares in standard errors, which come from the share in both together."""

    @property
    def _away(self) -> Whole:
        away = self.y * self.first - self.x * self.second
        return np.abs(away) if self.both else away

    @property
    def _spread(self) -> Whole:
        """The square of the standard error but for a constant; 0 where all items are alike."""
        return self.total * (self.first + self.second - self.total)

    def keys(self) -> NDArray[Any]:
        """Return the squares of z but for a constant, with their signs, so that different ones stay apart."""
        away, spread = self._away, self._spread
        squares = (away * away << 31) // np.maximum(spread, 1)
        return np.where(spread == 0, np.iinfo(np.int64).max, -np.sign(away) * squares)

    def scores(self) -> Floats:
        """Return z."""
        scale = math.sqrt((self.first + self.second) / (self.first * self.second))
        return self._away * scale / np.sqrt(np.maximum(self._spread, 1))

    def nominal(self, pair: tuple[int, int]) -> float:
        """Return the normal p-value of z."""
        return float(normal_at_least(self.scores()[pair]) * (2 if self.both else 1))

    def rejected(self, alpha: float) -> Table:
        """Return the pairs whose z is beyond the normal quantile."""
        return np.asarray(self.scores() >= -normal_quantile(alpha / 2 if self.both else alpha))


_ORDERS: dict[str, type[Order]] = {
    "fisher": FisherOrder,
    "boschloo": FisherOrder,
    "z": PooledOrder,
    "barnard": PooledOrder,
}


@lru_cache(maxsize=64)
def order_of(test: str, first: int, second: int, both: bool) -> Order:
    """Return the order of a test, for the second rate above the first, or on both sides."""
    return _ORDERS[test](first, second, both)


def calibrated(test: str) -> bool:
    """Tell whether a test goes as far as its true size allows."""
    return test in ("boschloo", "barnard")


@lru_cache(maxsize=64)
def _shares(first: int, second: int) -> Floats:
    """Return the chance of each pair among those of its total, where both samples have one rate."""
    x, y = np.indices((first + 1, second + 1))
    total, half = x + y, np.asarray(0.5)
    return np.asarray(
        binomial_pmf(x, first, half)
        * binomial_pmf(y, second, half)
        / binomial_pmf(total, first + second, half)
    )


def null_curve(table: NDArray[Any]) -> Floats:
    """Return the coefficients of the chance of a set of pairs as a polynomial in the rate of both samples."""
    first, second = table.shape[0] - 1, table.shape[1] - 1
    weights, total = _shares(first, second), np.add.outer(np.arange(first + 1), np.arange(second + 1))
    return np.asarray(np.bincount(total[table], weights[table], minlength=first + second + 1), dtype=float)


def convex(table: Table) -> bool:
    """Tell whether fewer in the first sample, or more in the second, never turns rejection into none.

    Then the chance to reject rises with the second rate and falls with the first, so over the claim
    ``p2<=p1`` it is greatest where both rates are equal: draw the counts of different rates from the same
    random numbers, item by item.
    """
    return bool((table[:-1] >= table[1:]).all() and (table[:, 1:] >= table[:, :-1]).all())


@lru_cache(maxsize=64)
def rejected(test: str, first: int, second: int, side: str, alpha: float, split: str = "half") -> Table:
    """Return which pairs of counts reject.

    Parameters
    ----------
    test : {"fisher", "boschloo", "z", "barnard"}
    first, second : int
        Items of the two samples.
    side : {"above", "below", "either"}
        Where the second rate lies, seen from the first, when the claim is false.
    alpha : float
    split : {"half", "rarest"}
        The rule of a two-sided test.

    Returns
    -------
    ndarray of bool, shape (first + 1, second + 1)
        Read-only.

    Examples
    --------
    >>> rejected("fisher", 4, 4, "above", 0.05).astype(int).tolist()[0]
    [0, 0, 0, 0, 1]
    """
    if side == "either" and split == "half":
        high = rejected(test, first, second, "above", alpha / 2)
        table = high | high[::-1, ::-1]
    else:
        table = _farthest(test, first, second, side == "either", alpha)
        table = table[::-1, ::-1] if side == "below" else table
    table.flags.writeable = False
    return table


def _farthest(test: str, first: int, second: int, both: bool, alpha: float) -> Table:
    """Return the pairs up to the last rank that keeps alpha."""
    order = order_of(test, first, second, both)
    if not calibrated(test):
        return order.rejected(alpha) & (order.total > 0) & (order.total < first + second)
    inside, outside = -1, int(order.ranks.max())  # the last rank holds what is never rejected
    while outside - inside > 1:
        middle = (inside + outside) // 2
        fits = stays_within(null_curve(order.up_to(middle)), alpha)
        inside, outside = (middle, outside) if fits else (inside, middle)
    return order.up_to(inside)


def p_value(test: str, first: int, second: int, side: str, split: str, pair: tuple[int, int]) -> float:
    """Return the p-value of a pair of counts: the least alpha at which it is rejected.

    The parameters are those of `rejected`.

    Examples
    --------
    >>> round(p_value("fisher", 4, 4, "above", "half", (1, 3)), 6)
    0.242857
    """
    if sum(pair) in (0, first + second):
        return 1.0
    if side == "either" and split == "half":
        sides = [p_value(test, first, second, one, split, pair) for one in ("above", "below")]
        return min(1.0, 2 * min(sides))
    mirrored = (first - pair[0], second - pair[1]) if side == "below" else pair
    order = order_of(test, first, second, side == "either")
    if not calibrated(test):
        return order.nominal(mirrored)
    return min(1.0, greatest(null_curve(order.up_to(int(order.ranks[mirrored])))))


def size(table: Table) -> float:
    """Return the greatest chance to reject over all rates that both samples may share."""
    return greatest(null_curve(table))


def best_power(first: int, second: int, middle: float, truth: tuple[float, ...], alpha: float) -> float:
    """Return the power of the best test of one common rate against two given ones, by their ratio of chances.

    The pair that alpha has room for in part only counts in part. No test of whether two rates are equal is
    more powerful; and the larger the samples, the more powerful is this one.

    Examples
    --------
    >>> round(best_power(20, 20, 0.3, (0.1, 0.5), 0.05), 3)
    0.905
    """
    sizes = [np.arange(n + 1.0) for n in (first, second)]
    null, true = (
        np.outer(*(binomial_pmf(x, x[-1], np.asarray(rate)) for x, rate in zip(sizes, rates, strict=True)))
        for rates in ((middle, middle), truth)
    )
    with np.errstate(divide="ignore", invalid="ignore"):
        order = np.argsort(-(true / null), axis=None)  # what the null holds impossible comes last, as NaN
    costs, gains = null.ravel()[order], true.ravel()[order]
    whole = int(np.searchsorted(np.cumsum(costs), alpha, side="right"))
    room = (alpha - costs[:whole].sum()) / costs[whole] if costs[whole] > 0 else 1.0
    return float(gains[:whole].sum() + room * gains[whole])
