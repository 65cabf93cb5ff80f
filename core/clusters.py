"""Defects that come in clusters: items made together, or in one place, are more alike than others.

Items come in clusters of `cluster` that follow one another; the last one may be cut short. Within a cluster
the defectives are tied by an intraclass `correlation`: the cluster's own rate varies around the process's
rate by a beta law, so the count in a cluster is beta-binomial and the sample's count a sum of such. Where
defects are counted per unit, a cluster's rate varies by a gamma law with the same correlation, and the
sample's count is negative binomial.

At the same rate such counts vary more, so plans that do not know of clusters reject true claims more often.

References
----------
J. G. Skellam, J. Roy. Statist. Soc. B 10 (1948), 257-261; M. Greenwood and G. U. Yule, J. Roy. Statist. Soc.
83 (1920), 255-279 (both from memory).
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from decimal import Decimal, localcontext
from fractions import Fraction
from functools import lru_cache
from itertools import accumulate
from math import comb, prod
from operator import mul
from typing import Any

import numpy as np

from steelyard.core import limits
from steelyard.core import tails_clustered as tails
from steelyard.core.exact import PoissonExact
from steelyard.core.law import CountLaw, ExactLaw
from steelyard.core.native import operand, poisson_native
from steelyard.core.numbers import typed, write_number
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Reject
from steelyard.core.tabulated import TabulatedLaw, WeightedCounts, digits_of

MOST_ITEMS = 2_000
MOST_UNITS = 1e9
_TINY = 1e-300
_DIGITS, _TIE = 60, Decimal("1e-40")


def tie_of(correlation: Any) -> Any:
    """Return ``correlation / (1 - correlation)``; floats, arrays or fractions."""
    return correlation / (1 - correlation)


class ClusteredItemsLaw(TabulatedLaw):
    """Defectives among n items in clusters: the sum of beta-binomial counts.

    Parameters
    ----------
    at_once : float
        How many items of all designs to come are tied together: for Chernoff's bound, in which a cluster
        counts no more than a single item does.
    """

    statistic, amount = "x", "n"
    fields = ("n", "cluster", "correlation")

    def __init__(self, at_once: float = 1.0) -> None:
        self.at_once = at_once

    def chances(self, row: tuple[float, ...], rates: Floats) -> Floats:
        """Return the chances of the sum over all clusters."""
        n, cluster, correlation = int(row[0]), int(row[1]), row[2]
        whole = tails.cluster_pmf(cluster, rates, tie_of(correlation))
        rest = tails.cluster_pmf(n % cluster, rates, tie_of(correlation))
        pairs = zip(whole, rest, strict=True)
        return np.array([np.convolve(_sum_of(one, n // cluster), last) for one, last in pairs])

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the law in whole numbers."""
        return _exact_items(int(row["n"]), int(row["cluster"]), tie_of(typed(row["correlation"])), rate)

    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit by bisection: the tails have no simple slope."""
        return limits.bisected_limit(self, row, x, end, miss, split, 1.0)

    def divergence(self, share: Floats, expected: Floats) -> Floats:
        """Return Chernoff's exponent per item: that of a cluster, whose share of defectives lies in 0..1."""
        return super().divergence(share, expected) / self.at_once

    def largest(self, columns: Columns) -> Any:
        """Return the most items of one plan."""
        del columns
        return MOST_ITEMS


def _sum_of(chances: Floats, times: int) -> Floats:
    """Return the chances of the sum of some independent counts with one law."""
    total, power = np.ones(1), chances
    while times:
        if times % 2:
            total = np.convolve(total, power)
        times //= 2
        if times:
            power = np.convolve(power, power)
    return total


@lru_cache(64)
def _exact_items(n: int, cluster: int, tie: Fraction, rate: Fraction) -> WeightedCounts:
    """Return the product of the clusters' generating functions, multiplied out at a z large enough."""
    part = math.lcm(rate.denominator, tie.denominator)
    bad, good, step = int(rate * part), int((1 - rate) * part), int(tie * part)
    sizes = (cluster, n % cluster)
    all_ways = [prod(part + i * step for i in range(size)) for size in sizes]
    width = (all_ways[0] ** (n // cluster) * all_ways[1]).bit_length() // 8 + 1
    whole, rest = (
        sum(ways << 8 * width * j for j, ways in enumerate(_ways(size, bad, good, step))) for size in sizes
    )
    return WeightedCounts(digits_of(whole ** (n // cluster) * rest, n + 1, width))


def _ways(size: int, bad: int, good: int, step: int) -> list[int]:
    """Return the weights of 0, 1 … `size` defectives in a cluster, by the products of its urn."""

    def rising(first: int) -> list[int]:
        return list(accumulate((first + i * step for i in range(size)), mul, initial=1))

    defective, rest = rising(bad), rising(good)
    return [comb(size, j) * defective[j] * rest[size - j] for j in range(size + 1)]


class ClusteredDefectsLaw(CountLaw):
    """Defects in units that come in clusters: the negative binomial law.

    Parameters
    ----------
    at_once : float
        The greatest excess of all designs to come, for Chernoff's bound.
    """

    statistic, amount, divisible = "x", "units", True
    fields = ("units", "cluster", "correlation")

    def __init__(self, at_once: float = 0.0) -> None:
        self.at_once = at_once

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X <= x)."""
        return tails.negative_binomial_at_most(x, columns["units"] * rates[0], excess(columns))

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X >= x)."""
        return tails.negative_binomial_at_least(x, columns["units"] * rates[0], excess(columns))

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X = x)."""
        return tails.negative_binomial_pmf(x, columns["units"] * rates[0], excess(columns))

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the law in decimals of sixty digits."""
        units, cluster = typed(row["units"]), typed(row["cluster"])
        more = min(cluster, units) * tie_of(typed(row["correlation"]))
        return NegativeBinomialDecimals(units * rate, more) if more else PoissonExact(units * rate)

    def most(self, columns: Columns) -> Any:
        """Return infinity."""
        del columns
        return math.inf

    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit by bisection."""
        return limits.bisected_limit(self, row, x, end, miss, split, math.inf)

    def native(self, design: Any, rule: Reject, cell: str) -> str | None:
        """Return a formula for the power, by the beta distribution."""
        more = float(excess({name: np.asarray(getattr(design, name)) for name in self.fields}))
        if more == 0:
            return poisson_native(design.units, rule, cell)
        rate, spread = operand(cell), write_number(more)
        shape, tails = f"{write_number(design.units)}*{rate}/{spread}", []
        if rule.low is not None:
            chance = f"_xlfn.BETA.DIST(1/(1+{spread}),{shape},{rule.low + 1:.0f},TRUE)"
            tails.append(f"IF({rate}=0,1,{chance})")
        if rule.high is not None:
            chance = f"_xlfn.BETA.DIST({spread}/(1+{spread}),{rule.high:.0f},{shape},TRUE)"
            tails.append(f"IF({rate}=0,0,{chance})")
        return "+".join(tails)

    def divergence(self, share: Floats, expected: Floats) -> Floats:
        """Return Chernoff's exponent of a negative binomial count per unit."""
        expected = np.maximum(expected, _TINY)
        alike = share * np.log(np.maximum(share, _TINY) / expected)
        if self.at_once == 0:
            return alike - share + expected
        shape = expected / self.at_once
        return alike - (share + shape) * np.log((share + shape) / (expected + shape))

    def largest(self, columns: Columns) -> Any:
        """Return the most units of one plan."""
        del columns
        return MOST_UNITS


def excess(columns: Columns) -> Floats:
    """Return by how much the variance of the defects exceeds their mean, as a multiple of it."""
    more: Floats = np.minimum(columns["cluster"], columns["units"]) * tie_of(columns["correlation"])
    return more


@dataclass(frozen=True, slots=True)
class NegativeBinomialDecimals:
    """The negative binomial law to sixty digits; its chances may be irrational.

    Sums that agree with a bound to forty digits count as equal to it.
    """

    mean: Fraction
    excess: Fraction

    def compare(self, tails: Iterable[tuple[int, str, int]], bound: Fraction) -> int:
        """Return the sign of a weighted sum of tails minus a bound; see `steelyard.core.law.ExactLaw`.

        Examples
        --------
        >>> NegativeBinomialDecimals(Fraction(2), Fraction(1)).compare([(1, "low", 3)], Fraction("0.8125"))
        0
        """
        with localcontext() as context:
            context.prec = _DIGITS
            total = Decimal(0)
            for weight, end, x in tails:
                below = sum(self._chances(x if end == "low" else x - 1), Decimal(0))
                total += weight * (below if end == "low" else 1 - below)
            return _sign(total - _decimal(bound))

    def compare_counts(self, x: int, y: int) -> int:
        """Return the sign of P(X = x) - P(X = y)."""
        with localcontext() as context:
            context.prec = _DIGITS
            one, other = (list(self._chances(k))[-1] if k >= 0 else Decimal(0) for k in (x, y))
            return _sign(one - other)

    def _chances(self, most: int) -> Iterator[Decimal]:
        """Yield P(X = 0) … P(X = most)."""
        mean, excess = _decimal(self.mean), _decimal(self.excess)
        shape, ratio = mean / excess, excess / (1 + excess)
        chance = (-shape * (1 + excess).ln()).exp()
        for k in range(most + 1):
            yield chance
            chance *= (shape + k) / (k + 1) * ratio


def _decimal(value: Fraction) -> Decimal:
    return Decimal(value.numerator) / Decimal(value.denominator)


def _sign(value: Decimal) -> int:
    return 0 if abs(value) <= _TIE else (1 if value > 0 else -1)
