"""Smallest sizes by looking at every size in turn, in exact arithmetic: how the searches are judged.

A law at one rate is a list, by amount, of whole-number tails: ``tails[x]`` over ``total`` is P(X >= x).
"""

from __future__ import annotations

import math
from bisect import bisect_left
from dataclasses import dataclass
from fractions import Fraction
from functools import cache, cached_property
from itertools import accumulate

import mpmath

DIGITS = (
    60  # of Poisson probabilities, which are irrational; comparisons closer than half of that are refused
)
CLOSE = 10 ** (DIGITS // 2)


@dataclass(frozen=True)
class Amount:
    """The counts of one amount at one rate, as whole numbers."""

    weights: list[int]
    total: int
    rounded: bool = False

    @cached_property
    def tails(self) -> list[int]:
        """Return P(X >= x) for x from 0 to one more than the greatest count, times the total."""
        return [*reversed(list(accumulate(reversed(self.weights)))), 0]

    def at_most(self, part: int, bound: Fraction) -> bool:
        """Tell whether ``part / total`` is at most a bound."""
        distance = part * bound.denominator - bound.numerator * self.total
        assert not self.rounded or abs(distance) > bound.denominator * self.total // CLOSE
        return distance <= 0


@cache
def binomial(n: int, rate: Fraction) -> Amount:
    """Return the binomial law."""
    a, b = rate.numerator, rate.denominator
    return Amount([math.comb(n, x) * a**x * (b - a) ** (n - x) for x in range(n + 1)], b**n)


@cache
def hypergeometric(lot: int, defectives: int, n: int) -> Amount:
    """Return the hypergeometric law."""
    weights = [math.comb(defectives, x) * math.comb(lot - defectives, n - x) for x in range(n + 1)]
    return Amount(weights, math.comb(lot, n))


@cache
def poisson(mean: Fraction) -> Amount:
    """Return the Poisson law to `DIGITS` decimal places; counts less likely than that are left off."""
    spare = 20 + int(mean)  # the search starts at exp(-mean)
    with mpmath.workdps(DIGITS + spare + 10):
        term = int(
            mpmath.exp(-mpmath.mpf(mean.numerator) / mean.denominator) * mpmath.mpf(10) ** (DIGITS + spare)
        )
    terms, x = [term], 0
    while x <= mean or term >= 10**spare:
        x += 1
        term = term * mean.numerator // (mean.denominator * x)
        terms.append(term)
    weights = [term // 10**spare for term in terms]
    return Amount([10**DIGITS - sum(weights[1:]), *weights[1:]], 10**DIGITS, rounded=True)


def region(at: Amount, side: str, alpha: Fraction, split: str) -> tuple[int, int]:
    """Return the counts of the largest region: at most the first number, or at least the second."""
    tails, most = at.tails, len(at.weights)
    if side == "above":
        return -1, bisect_left(range(most), True, key=lambda x: at.at_most(tails[x], alpha))
    if side == "below":
        return bisect_left(
            range(most), True, key=lambda x: not at.at_most(at.total - tails[x + 1], alpha)
        ) - 1, most
    mode = at.weights.index(max(at.weights))
    if split == "rarest":
        order = sorted(at.weights)
        sums = dict(zip(order, accumulate(order), strict=True))  # of equal weights the last sum stays
        low = high = [sums[weight] for weight in at.weights]
    else:
        less = at.weights if split == "nearest" else [0] * most
        low = [2 * (at.total - tails[x + 1]) - less[x] for x in range(most)]
        high = [2 * tails[x] - less[x] for x in range(most)]
    # A bimodal law has its modes side by side; neither is in any region but that of everything.
    start = bisect_left(range(mode), True, key=lambda x: not at.at_most(low[x], alpha)) - 1
    stop = bisect_left(range(mode, most), True, key=lambda x: at.at_most(high[x], alpha)) + mode
    return start, stop


def power(at: Amount, low: int, high: int) -> int:
    """Return the probability of a region, times the total."""
    tails = [*at.tails, *[0] * (high + 1)]
    return at.total - tails[low + 1] + tails[high]


def meets(
    claim: Amount, catches: list[Amount], side: str, alpha: Fraction, target: Fraction, split: str
) -> bool:
    """Tell whether the largest region that keeps alpha reaches the power at every rate to catch."""
    low, high = region(claim, side, alpha, split)
    return all(catch.at_most(catch.total - power(catch, low, high), 1 - target) for catch in catches)


def first_and_lasting(met: list[bool]) -> tuple[int, int]:
    """Return the first amount met, and the one from which on all are; ``met[0]`` belongs to amount 1."""
    failing = [amount for amount, good in enumerate(met, 1) if not good]
    return met.index(True) + 1, max(failing, default=0) + 1


def enough(law: str, claim: float, catch: float, alpha: float, target: float) -> int:
    """Return an amount from which on both risks are kept, whatever the split, by Chernoff's bound.

    Around a count with chance f, counts that are no more probable have at most ``(amount + 4) f`` together.
    """

    def divergence(share: float, expected: float) -> float:
        if law == "poisson":
            return share * math.log(share / expected) - share + expected
        return share * math.log(share / expected) + (1 - share) * math.log((1 - share) / (1 - expected))

    needed = []
    for part in range(1, 20):
        share = claim + (catch - claim) * part / 20
        at_claim, amount = divergence(share, claim), -math.log(1 - target) / divergence(share, catch)
        while (amount + 4) * math.exp(-amount * at_claim) > alpha:
            amount += 1 + amount / 10
        needed.append(math.ceil(amount))
    return min(needed)
