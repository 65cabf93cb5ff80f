"""Exponential life tests: failures, and the time on test, at a mean life.

Units fail at a constant rate of 1 / life. What is observed depends on when the test stops:

- at a total time on test, failed units replaced or many on test: failures are Poisson with mean time / life;
- on a fixed clock, failed units not replaced: every unit fails with chance 1 - exp(-clock / life);
- at the r-th failure: twice the total time over the life is chi-square with 2 r degrees of freedom.

Failures get fewer as the life grows, so a claim that the life is at most so long is rejected by few failures.

References
----------
B. Epstein and M. Sobel, J. Amer. Statist. Assoc. 48 (1953), 486-502; B. Epstein, Ann. Math. Statist. 25
(1954), 555-564; IEC 61124 (from memory).
"""

from __future__ import annotations

import math
from abc import abstractmethod
from collections.abc import Mapping
from decimal import Decimal, localcontext
from fractions import Fraction
from typing import Any

import numpy as np

from steelyard.core import exact, tails
from steelyard.core import tails_continuous as continuous
from steelyard.core.errors import NoAnswer
from steelyard.core.kinds.binomial import BinomialLaw
from steelyard.core.kinds.poisson import PoissonLaw
from steelyard.core.law import ContinuousLaw, CountLaw, ExactLaw
from steelyard.core.numbers import typed
from steelyard.core.parameter import Columns, Floats
from steelyard.core.splits import ONE_SIDED

MOST_TIME = 1e15
_BINOMIAL, _POISSON = BinomialLaw(), PoissonLaw()
_MOST_MEAN = 1e15  # failures expected; more are not told apart
_DIGITS = 90
_TURNED = {"above": "below", "below": "above", "either": "either"}
_OTHER = {"lower": "upper", "upper": "lower"}


class FailureLaw(CountLaw):
    """Failures in a life test that stops at a time."""

    statistic = "failures"

    def p_value(self, columns: Columns, rate: Floats, x: Floats, side: str, split: str) -> Floats:
        """Return the p-value: few failures speak for a long life."""
        return super().p_value(columns, rate, x, _TURNED[side], split)

    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit for the life: from the other limit for the rate.

        Raises
        ------
        NoAnswer
            When no life is too long, as after no failure.
        """
        rate = self.rate_limit(row, x, _OTHER[end], miss, split)
        if rate <= 0:
            message = "no upper limit for the life: with so few failures it may be as long as you like"
            raise NoAnswer(message)
        return self.life_at(row, rate)

    @abstractmethod
    def rate_limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit for the chance, or the rate, of a failure."""

    @abstractmethod
    def life_at(self, row: Mapping[str, Any], rate: float) -> float:
        """Return the life that gives a chance, or a rate, of a failure."""


class TotalTimeLaw(FailureLaw):
    """Failures in a total time on test: Poisson."""

    amount, divisible = "time", True

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(failures <= x)."""
        return tails.poisson_at_most(x, _mean(columns, rates[0]))

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(failures >= x)."""
        return tails.poisson_at_least(x, _mean(columns, rates[0]))

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(failures = x)."""
        return tails.poisson_pmf(x, _mean(columns, rates[0]))

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the law in enclosures; `rate` is the life."""
        return exact.PoissonExact(typed(row["time"]) / rate)

    def share(self, columns: Columns, rate: Floats) -> Floats:
        """Return the failures expected per unit of time."""
        del columns
        return np.asarray(1 / np.asarray(rate))

    def divergence(self, share: Floats, expected: Floats) -> Floats:
        """Return Chernoff's exponent for a Poisson count."""
        return _POISSON.divergence(share, expected)

    def most(self, columns: Columns) -> Any:
        """Return infinity."""
        del columns
        return math.inf

    def largest(self, columns: Columns) -> Any:
        """Return the longest time on test."""
        del columns
        return MOST_TIME

    def rate_limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit for the failures per unit of time."""
        return _POISSON.limit({"units": row["time"]}, x, end, miss, split)

    def life_at(self, row: Mapping[str, Any], rate: float) -> float:
        """Return the life, one over the rate."""
        del row
        return 1 / rate


class ClockLaw(FailureLaw):
    """Failures among units that all run for the same time, or until they fail: binomial."""

    amount = "units"

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(failures <= x)."""
        n, failing, surviving = self._chances(columns, rates[0])
        few = tails.binomial_at_most(x, n, failing)
        return np.where(failing <= 0.5, few, tails.binomial_at_least(n - x, n, surviving))

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(failures >= x)."""
        n, failing, surviving = self._chances(columns, rates[0])
        many = tails.binomial_at_least(x, n, failing)
        return np.where(failing <= 0.5, many, tails.binomial_at_most(n - x, n, surviving))

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(failures = x)."""
        n, failing, surviving = self._chances(columns, rates[0])
        return np.where(
            failing <= 0.5, tails.binomial_pmf(x, n, failing), tails.binomial_pmf(n - x, n, surviving)
        )

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the law in rationals, at a chance of failure of so many digits that nothing ties."""
        share = typed(row["clock"]) / rate
        with localcontext() as context:
            context.prec = _DIGITS
            surviving = (-(Decimal(share.numerator) / Decimal(share.denominator))).exp()
            return exact.BinomialExact(int(row["units"]), 1 - Fraction(surviving))

    def share(self, columns: Columns, rate: Floats) -> Floats:
        """Return the chance that a unit fails."""
        return np.asarray(-np.expm1(-columns["clock"] / np.asarray(rate)))

    def largest(self, columns: Columns) -> Any:
        """Return the most units of one test."""
        return _BINOMIAL.largest(columns)

    def rate_limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit for the chance that a unit fails."""
        return _BINOMIAL.limit({"n": row["units"]}, x, end, miss, split)

    def life_at(self, row: Mapping[str, Any], rate: float) -> float:
        """Return the life at which a unit fails with a chance; 0 where it surely does."""
        return float(-row["clock"] / math.log1p(-rate)) if rate < 1 else 0.0

    @staticmethod
    def _chances(columns: Columns, life: Floats) -> tuple[Any, Floats, Floats]:
        """Return the units, and the chances to fail and to survive, each to all its digits."""
        share = _mean({"time": columns["clock"]}, life)
        return columns["units"], -np.expm1(-share), np.exp(-share)


class FailureTimeLaw(ContinuousLaw):
    """The total time on test up to the last of so many failures."""

    statistic = "time"

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(time <= x)."""
        return continuous.chi_square_at_most(self._ratio(x, rates[0]), 2 * columns["failures"])

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(time >= x)."""
        return continuous.chi_square_at_least(self._ratio(x, rates[0]), 2 * columns["failures"])

    def support(self, design: Any) -> tuple[float, float]:
        """Return all numbers from 0."""
        del design
        return 0.0, math.inf

    def quantile(self, prob: Any, columns: Columns, rate: Floats, end: str) -> Floats:
        """Return the time with the chance `prob` at or below it, or at or above it."""
        return np.asarray(rate * continuous.chi_square_quantile(prob, 2 * columns["failures"], end) / 2)

    @staticmethod
    def _ratio(x: Any, life: Floats) -> Floats:
        with np.errstate(divide="ignore", over="ignore"):  # a search may look at a life of 0
            return np.asarray(2 * np.maximum(x, 0.0) / life)


def demonstration_time(life: float, alpha: float, allowed: int) -> float:
    """Return the least total time in which so many failures still show a longer life; ties are exact.

    Examples
    --------
    >>> round(demonstration_time(1000.0, 0.1, 0), 2)
    2302.59
    """
    law, time = (
        TotalTimeLaw(),
        float(life * continuous.chi_square_quantile(alpha, 2 * allowed + 2, "high") / 2),
    )
    while law.exact({"time": time}, typed(life)).compare([(1, "low", allowed)], typed(alpha)) > 0:
        time = math.nextafter(time, math.inf)
    return time


def demonstration_clock(life: float, alpha: float, allowed: int, units: int) -> float:
    """Return the least time on the clock in which so many failures of all units show a longer life."""
    law = ClockLaw()
    fails = _BINOMIAL.limit({"n": units}, allowed, "upper", alpha, ONE_SIDED)
    clock = float(-life * math.log1p(-fails))
    row = {"units": units, "clock": clock}
    while law.exact(row, typed(life)).compare([(1, "low", allowed)], typed(alpha)) > 0:
        row["clock"] = clock = math.nextafter(clock, math.inf)
    return clock


def _mean(columns: Columns, life: Floats) -> Floats:
    with np.errstate(divide="ignore", over="ignore"):  # a search may look at a life of 0
        return np.asarray(np.minimum(columns["time"] / np.asarray(life, dtype=float), _MOST_MEAN))
