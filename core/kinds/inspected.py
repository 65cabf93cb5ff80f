"""Plans for counts when inspection errs: a share of the defectives is missed, some good items are condemned.

The claim, alpha and every rate are about the truth; the counts are what is found. Items from a process are
found defective at the rate ``p (1 - misses) + (1 - p) false alarms``; defects are found at the rate
``rate (1 - misses) + false alarms``, the latter per unit.

In a sample with Y defectives from a finite lot the finds are ``Bin(Y, 1 - m) + Bin(n - Y, f)`` for misses m
and false alarms f. Their generating function is the sum of ``P(Y = y) (m + (1-m) z)^y (1-f + f z)^(n-y)``,
multiplied out by Horner's rule. It has real zeros only, so the finds have one mode; by Maclaurin's inequality
it is at most that of draws with replacement, so Chernoff's bound holds.

References
----------
N. L. Johnson, S. Kotz and X. Wu, "Inspection Errors for Attributes in Quality Control", 1991 (from memory).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from math import comb, lcm
from typing import Any

import numpy as np

from steelyard.core import limits, tails
from steelyard.core.errors import InvalidValue
from steelyard.core.forms import plain
from steelyard.core.inspection import (
    InspectedLaw,
    check_misses,
    check_shares,
    found_per_item,
    found_per_unit,
    inspected_grammar,
)
from steelyard.core.kind import register
from steelyard.core.kinds.binomial import BinomialKind, BinomialLaw, Items
from steelyard.core.kinds.hypergeometric import HypergeometricKind, LotSample
from steelyard.core.kinds.poisson import MOST_EXPECTED, Extent, PoissonKind, PoissonLaw
from steelyard.core.law import ExactLaw
from steelyard.core.numbers import typed
from steelyard.core.parameter import Columns, Floats, show_rate
from steelyard.core.plan import Plan
from steelyard.core.questions import size
from steelyard.core.tabulated import TabulatedLaw, WeightedCounts, digits_of

MOST_DRAWN = 1_000
OF_ITEMS = (
    "Inspection misses a share of {misses} of the defectives and condemns a share of {false_alarms} "
    "of the good items."
)
OF_DEFECTS = (
    "Inspection misses a share of {misses} of the defects and finds {false_alarms} per unit that are none."
)


@dataclass(frozen=True, slots=True)
class InspectedItems(Items):
    """`n` items inspected, with shares of missed defectives and of condemned good items."""

    misses: float
    false_alarms: float = 0.0

    def __post_init__(self) -> None:
        Items.__post_init__(self)
        check_shares(self.misses, self.false_alarms)


@dataclass(frozen=True, slots=True)
class InspectedExtent(Extent):
    """`units` inspected, with a share of missed defects and false finds per unit."""

    misses: float
    false_alarms: float = 0.0

    def __post_init__(self) -> None:
        Extent.__post_init__(self)
        check_misses(self.misses)
        if not 0 <= self.false_alarms <= MOST_EXPECTED / self.units:
            rule = f"expect from 0 to {MOST_EXPECTED:.0f} false finds in {self.units:g} units"
            raise InvalidValue("false-alarms", rule, self.false_alarms)


@dataclass(frozen=True, slots=True)
class InspectedLotSample(LotSample):
    """`n` items drawn from a lot, with shares of missed defectives and of condemned good items."""

    misses: float
    false_alarms: float = 0.0

    def __post_init__(self) -> None:
        LotSample.__post_init__(self)
        check_shares(self.misses, self.false_alarms)
        if self.n > MOST_DRAWN:
            raise InvalidValue("n", f"be at most {MOST_DRAWN} where inspection of a lot errs", self.n)


class InspectedLotLaw(TabulatedLaw):
    """What is found among n items drawn from a lot with D defectives."""

    statistic, amount = "x", "n"
    fields = ("lot", "n", "misses", "false_alarms")

    def chances(self, row: tuple[float, ...], rates: Floats) -> Floats:
        """Return the generating function's coefficients, by Horner's rule from the most defectives down."""
        lot, n, misses, false_alarms = row
        defectives = tails.hypergeometric_pmf(np.arange(n + 1), lot, rates[:, None], n)
        possible = np.flatnonzero((defectives > 0).any(axis=0))
        least, most = int(possible[0]), int(possible[-1])
        good = np.eye(1, most - least + 1)[0]
        found = np.zeros((rates.size, good.size))
        for chance in defectives.T[most : least - 1 if least else None : -1]:
            found = _times(found, misses, 1 - misses) + chance[:, None] * good
            good = _times(good, 1 - false_alarms, false_alarms)
        caught = tails.binomial_pmf(least - np.arange(least + 1), least, misses)
        alarmed = tails.binomial_pmf(np.arange(n - most + 1), n - most, false_alarms)
        always = np.convolve(caught, alarmed)  # of the defectives and good items that every sample has
        return np.array([np.convolve(chances, always) for chances in found])

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the law in whole numbers."""
        return _exact(
            int(row["lot"]), int(rate), int(row["n"]), typed(row["misses"]), typed(row["false_alarms"])
        )

    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit for D; any count may be found whatever D is, so that all of the lot is searched."""
        return limits.lot_limit(self, row, x, end, miss, split, (0.0, float(row["lot"])))

    def largest(self, columns: Columns) -> Any:
        """Return the largest sample."""
        return np.minimum(columns["lot"], MOST_DRAWN)

    def share(self, columns: Columns, rate: Floats) -> Floats:
        """Return the expected share of finds."""
        found: Floats = found_per_item(rate / columns["lot"], columns["misses"], columns["false_alarms"])
        return found


def _times(series: Floats, constant: float, linear: float) -> Floats:
    """Return a power series times ``constant + linear z``; coefficients run along the last axis."""
    product = constant * series
    product[..., 1:] += linear * series[..., :-1]
    return product


@lru_cache(64)
def _exact(lot: int, defectives: int, n: int, misses: Fraction, false_alarms: Fraction) -> WeightedCounts:
    """Return the generating function in whole numbers, multiplied out at a z that is large enough."""
    parts = lcm(misses.denominator, false_alarms.denominator)
    missed, alarmed = int(misses * parts), int(false_alarms * parts)
    width = (comb(lot, n) * parts**n).bit_length() // 8 + 1
    z = 256**width
    defective, good = missed + (parts - missed) * z, parts - alarmed + alarmed * z
    least, most = max(0, n + defectives - lot), min(n, defectives)
    total, power = 0, good ** (n - most)
    for y in range(most, least - 1, -1):
        total = total * defective + comb(defectives, y) * comb(lot - defectives, n - y) * power
        power *= good
    return WeightedCounts(digits_of(total * defective**least, n + 1, width))


def with_perfect_inspection(plan: Plan) -> list[str]:
    """Return in words what the same counts would mean if inspection were perfect; nothing without a claim."""
    if plan.claim is None:
        return []
    perfect = show_rate(size(plain(plan)))
    return [f"With perfect inspection a true claim would be rejected with probability {perfect} at most."]


class _Erring:
    """What all kinds with imperfect inspection have in common."""

    def remarks(self, plan: Plan) -> list[str]:
        """Return what the same counts would mean if inspection were perfect."""
        return with_perfect_inspection(plan)


class InspectedBinomialKind(_Erring, BinomialKind):
    """Single plans for the rate of defectives, with imperfect inspection."""

    law = InspectedLaw(BinomialLaw(), found_per_item, "p")
    grammar = inspected_grammar(BinomialKind.grammar, InspectedItems, OF_ITEMS)


class InspectedPoissonKind(_Erring, PoissonKind):
    """Single plans for defects per unit, with imperfect inspection."""

    law = InspectedLaw(PoissonLaw(), found_per_unit, "rate")
    grammar = inspected_grammar(PoissonKind.grammar, InspectedExtent, OF_DEFECTS)


class InspectedHypergeometricKind(_Erring, HypergeometricKind):
    """Single plans for a finite lot, with imperfect inspection."""

    law = InspectedLotLaw()
    grammar = inspected_grammar(HypergeometricKind.grammar, InspectedLotSample, OF_ITEMS)


INSPECTED = tuple(
    register(kind)
    for kind in (InspectedBinomialKind(), InspectedPoissonKind(), InspectedHypergeometricKind())
)
