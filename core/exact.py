"""
Decisions in exact arithmetic: whether a probability is below, equal to or above a given number.

A float cannot tell ``3/60`` from ``0.05``. Where tails lie close to alpha, or two counts are about equally
probable, these laws decide on the decimal numbers as typed, in whole-number arithmetic.

Method: neighbouring terms of all three laws have a rational ratio that falls from count to count. So every
count gets a whole-number weight, built up by these ratios from the most probable count outwards; rounding
and the ends left off have simple bounds, and weight over total weight encloses a probability. The enclosure
has 256 bits to spare, so what it can't separate is a tie in all likelihood; the exact fraction, summed by
binary splitting, settles it. The Poisson law has an irrational factor exp(-mean) and can't tie with
a fraction: its enclosures grow until they separate.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import accumulate, count, pairwise
from math import comb, prod

Tail = tuple[int, str, int]  # weight; "low" for P(X <= x), "high" for P(X >= x); x
Run = tuple[int, int | None, int]  # first count, count after the last (None: no end), weight

_SPARE_BITS = 256


class _ExactLaw(ABC):
    """A law of counts at rational parameters, which have been validated."""

    __slots__ = ()

    @abstractmethod
    def support(self) -> tuple[int, int | None]:
        """Return the least and the greatest possible count; None where there is no greatest."""

    @abstractmethod
    def mode(self) -> int:
        """Return a most probable count."""

    @abstractmethod
    def ratio(self, k: int) -> tuple[int, int]:
        """Return P(X = k + 1) / P(X = k) as numerator and denominator; `k` and ``k + 1`` are possible."""

    @abstractmethod
    def point(self, k: int) -> tuple[int, int] | None:
        """Return P(X = k) as numerator and denominator, not reduced; None where it is irrational."""

    def compare(self, tails: Iterable[Tail], bound: Fraction) -> int:
        """
        Return the sign of a weighted sum of tails minus a bound.

        Parameters
        ----------
        tails : iterable of (weight, end, x)
            Whole weights from 0; end ``"low"`` stands for P(X <= x), ``"high"`` for P(X >= x).
        bound : Fraction
            What the sum is compared with, e.g. alpha.

        Examples
        --------
        >>> HypergeometricExact(60, 1, 3).compare([(1, "high", 1)], Fraction("0.05"))
        0
        """
        runs = self._runs(list(tails))
        weights = [weight for _, _, weight in runs]
        if len(runs) == 1 or not min(weights) < bound < max(weights):
            # a mean of weights that are not all equal lies strictly between the least and the greatest
            return _sign(weights[0] - bound) if len(runs) == 1 else (1 if bound <= min(weights) else -1)
        bits = _SPARE_BITS + max(0, bound.denominator.bit_length() - abs(bound.numerator).bit_length())
        while True:
            least, most = self._enclose(runs, bits)
            if bound < least or most < bound:
                return 1 if bound < least else -1
            if self.point(self.mode()) is not None:
                return self._settle(runs, bound)
            bits *= 2

    def compare_counts(self, x: int, y: int) -> int:
        """
        Return the sign of P(X = x) - P(X = y).

        Examples
        --------
        >>> BinomialExact(4, Fraction("0.2")).compare_counts(0, 1)
        0
        """
        low, high = self.support()
        possible = [k >= low and (high is None or k <= high) for k in (x, y)]
        if x == y or not all(possible):
            return possible[0] - possible[1]
        if x > y:
            return -self.compare_counts(y, x)
        first, sums, slack = _weights(self, _SPARE_BITS)
        there = [
            sums[k - first + 1] - sums[k - first] if 0 <= k - first < len(sums) - 1 else 0 for k in (x, y)
        ]
        if abs(there[0] - there[1]) > slack:
            return _sign(there[0] - there[1])
        ratios = [self.ratio(k) for k in range(x, y)]
        return _sign(_product([b for _, b in ratios]) - _product([a for a, _ in ratios]))

    def _runs(self, tails: list[Tail]) -> list[Run]:
        """Cut the support where the weight of a count changes."""
        low, high = self.support()
        end = None if high is None else high + 1
        cuts = {x + 1 if side == "low" else x for _, side, x in tails}
        inner = sorted(cut for cut in cuts if low < cut and (end is None or cut < end))
        runs: list[Run] = []
        for first, stop in pairwise([low, *inner, end]):
            assert first is not None
            weight = sum(w for w, side, x in tails if (first <= x if side == "low" else first >= x))
            if runs and runs[-1][2] == weight:
                first = runs.pop()[0]
            runs.append((first, stop, weight))
        return runs

    def _enclose(self, runs: Sequence[Run], bits: int) -> tuple[Fraction, Fraction]:
        first, sums, slack = _weights(self, bits)

        def up_to(count: int | None) -> int:
            last = len(sums) - 1
            return sums[last if count is None else min(max(count - first, 0), last)]

        total = sum(weight * (up_to(stop) - up_to(start)) for start, stop, weight in runs)
        heaviest = max(weight for _, _, weight in runs)
        return Fraction(total, sums[-1] + slack), Fraction(total + heaviest * slack, sums[-1])

    def _settle(self, runs: Sequence[Run], bound: Fraction) -> int:
        """Compare exact fractions; the run with the mode is the longest and is had from the others."""
        mode = self.mode()
        base = next(weight for first, stop, weight in runs if first <= mode and (stop is None or mode < stop))
        top, bottom = base * bound.denominator - bound.numerator, bound.denominator
        for first, stop, weight in runs:
            if weight != base:
                assert stop is not None
                a, b = self._chance(first, stop)
                top, bottom = top * b + (weight - base) * a * bottom, bottom * b
        return _sign(top)

    def _chance(self, first: int, stop: int) -> tuple[int, int]:
        """Return P(first <= X < stop) as numerator and denominator."""
        point = self.point(first)
        assert point is not None
        if stop - first == 1:
            return point
        _, below, total = _split(self, first, stop - 1)
        return point[0] * (below + total), point[1] * below


@dataclass(frozen=True, slots=True)
class BinomialExact(_ExactLaw):
    """The number of defectives in `n` items at the rate `p`."""

    n: int
    p: Fraction

    def support(self) -> tuple[int, int]:
        """Return the least and the greatest possible count."""
        return (self.n if self.p == 1 else 0), (0 if self.p == 0 else self.n)

    def mode(self) -> int:
        """Return a most probable count."""
        return min(int((self.n + 1) * self.p), self.n)

    def ratio(self, k: int) -> tuple[int, int]:
        """Return P(X = k + 1) / P(X = k)."""
        a, b = self.p.numerator, self.p.denominator
        return (self.n - k) * a, (k + 1) * (b - a)

    def point(self, k: int) -> tuple[int, int]:
        """Return P(X = k)."""
        a, b = self.p.numerator, self.p.denominator
        return comb(self.n, k) * a**k * (b - a) ** (self.n - k), b**self.n


@dataclass(frozen=True, slots=True)
class PoissonExact(_ExactLaw):
    """The number of events where `mean` are expected."""

    mean: Fraction

    def support(self) -> tuple[int, int | None]:
        """Return the least and the greatest possible count."""
        return 0, (0 if self.mean == 0 else None)

    def mode(self) -> int:
        """Return a most probable count."""
        return int(self.mean)

    def ratio(self, k: int) -> tuple[int, int]:
        """Return P(X = k + 1) / P(X = k)."""
        return self.mean.numerator, (k + 1) * self.mean.denominator

    def point(self, k: int) -> None:
        """Return None: exp(-mean) is irrational."""


@dataclass(frozen=True, slots=True)
class HypergeometricExact(_ExactLaw):
    """The number of defectives in `n` items drawn from a lot that holds `defectives` of them."""

    lot: int
    defectives: int
    n: int

    def support(self) -> tuple[int, int]:
        """Return the least and the greatest possible count."""
        return max(0, self.n + self.defectives - self.lot), min(self.n, self.defectives)

    def mode(self) -> int:
        """Return a most probable count."""
        return (self.n + 1) * (self.defectives + 1) // (self.lot + 2)

    def ratio(self, k: int) -> tuple[int, int]:
        """Return P(X = k + 1) / P(X = k)."""
        good_left = self.lot - self.defectives - self.n + k + 1
        return (self.defectives - k) * (self.n - k), (k + 1) * good_left

    def point(self, k: int) -> tuple[int, int]:
        """Return P(X = k)."""
        good = self.lot - self.defectives
        return comb(self.defectives, k) * comb(good, self.n - k), comb(self.lot, self.n)


@lru_cache(maxsize=64)
def _weights(law: _ExactLaw, bits: int) -> tuple[int, list[int], int]:
    """
    Return the first weighed count, the running sums of the weights from 0, and their greatest error.

    A weight is the integer part of ``2**bits P(X = k) / P(X = mode)`` up to rounding downwards at every
    step. The true weights and all that was left off sum up to at most the error more.
    """
    low, high = law.support()
    mode = law.mode()
    ups = (law.ratio(k) for k in range(mode, high)) if high is not None else _endless(law, mode)
    downs = ((b, a) for a, b in (law.ratio(k) for k in range(mode - 1, low - 1, -1)))
    above, slack_above = _fall(ups, bits)
    below, slack_below = _fall(downs, bits)
    weights = [*reversed(below), 1 << bits, *above]
    return mode - len(below), [0, *accumulate(weights)], slack_above + slack_below


def _endless(law: _ExactLaw, start: int) -> Iterator[tuple[int, int]]:
    return (law.ratio(k) for k in count(start))


def _fall(ratios: Iterable[tuple[int, int]], bits: int) -> tuple[list[int], int]:
    """Return the weights on one side of the mode, and what they and all further ones lack at most."""
    weights: list[int] = []
    weight = 1 << bits
    for distance, (a, b) in enumerate(ratios, 1):
        weight = weight * a // b
        if weight == 0:  # a < b: the rest falls at least like a geometric series
            return weights, distance * distance + distance * b // (b - a) + 1
        weights.append(weight)
    return weights, len(weights) ** 2


def _split(law: _ExactLaw, first: int, stop: int) -> tuple[int, int, int]:
    """
    Return P, Q, T: the products of the ratios' numerators and denominators, and the series' numerator.

    T/Q is the sum of the running products of the ratios from `first` on.
    """
    if stop - first == 1:
        a, b = law.ratio(first)
        return a, b, a
    middle = (first + stop) // 2
    p1, q1, t1 = _split(law, first, middle)
    p2, q2, t2 = _split(law, middle, stop)
    return p1 * p2, q1 * q2, t1 * q2 + p1 * t2


def _product(factors: Sequence[int]) -> int:
    """Multiply numbers of like size with like, which keeps long products fast."""
    if len(factors) < 32:
        return prod(factors)
    half = len(factors) // 2
    return _product(factors[:half]) * _product(factors[half:])


def _sign(value: Fraction | int) -> int:
    return (value > 0) - (value < 0)
