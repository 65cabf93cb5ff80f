"""What a plan that compares one statistic with limits needs: the statistic's two tails."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Callable, Iterable, Mapping
from fractions import Fraction
from typing import Any, Protocol

import numpy as np

from steelyard.core import limits, splits
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Reject
from steelyard.core.priors import Prior
from steelyard.core.splits import ONE_SIDED

_TINY = 1e-300


class Law(ABC):
    """The distribution of one statistic, given a design and the parameter.

    Attributes
    ----------
    statistic : str
        How plan text writes the statistic, e.g. ``"x"``.
    step : int
        Distance between neighbouring values: 1 for counts, 0 for measurements.
    """

    statistic: str
    step: int

    @abstractmethod
    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(statistic <= x)."""

    @abstractmethod
    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(statistic >= x), never as 1 minus a lower tail."""

    @abstractmethod
    def support(self, design: Any) -> tuple[float, float]:
        """Return the least and the greatest value of the statistic."""

    @abstractmethod
    def critical(self, columns: Columns, rate: Floats, alpha: Any, end: str, split: str) -> Floats:
        """Return the critical values at one end: ``"low"`` or ``"high"``; NaN where none can reject.

        `rate` is the claim's boundary; `split` is ``"one-sided"``, or how the two ends share alpha.
        """

    @abstractmethod
    def p_value(self, columns: Columns, rate: Floats, x: Floats, side: str, split: str) -> Floats:
        """Return the p-value of the statistic `x` for the side ``"above"``, ``"below"`` or ``"either"``."""

    @abstractmethod
    def nested(
        self, columns: Columns, rate: Floats, low: float | None, high: float | None, split: str
    ) -> bool:
        """Tell whether a two-sided rule rejects exactly what has a p-value below some level."""


class ContinuousLaw(Law):
    """The law of a measurement; a two-sided test rejects with equal tails, split ``half``."""

    step = 0

    @abstractmethod
    def quantile(self, prob: float, columns: Columns, rate: Floats, end: str) -> Floats:
        """Return the value with the chance `prob` at or below it (end ``"low"``) or at or above it."""

    def critical(self, columns: Columns, rate: Floats, alpha: Any, end: str, split: str) -> Floats:
        """Return the quantile of alpha, or of half of it for a two-sided test."""
        self._refuse(split)
        return self.quantile(alpha if split == ONE_SIDED else alpha / 2, columns, rate, end)

    def p_value(self, columns: Columns, rate: Floats, x: Floats, side: str, split: str) -> Floats:
        """Return the tail beyond `x`, or twice the smaller tail."""
        self._refuse(split)
        if side == "above":
            return self.at_least(x, columns, rate)
        if side == "below":
            return self.at_most(x, columns, rate)
        smaller = np.minimum(self.at_most(x, columns, rate), self.at_least(x, columns, rate))
        return np.minimum(1.0, 2.0 * smaller)

    def nested(
        self, columns: Columns, rate: Floats, low: float | None, high: float | None, split: str
    ) -> bool:
        """Tell whether both tails have the same chance."""
        if low is None or high is None:
            return False
        ends = (float(self.p_value(columns, rate, np.asarray(x), "either", split)) for x in (low, high))
        return math.isclose(*ends, rel_tol=1e-9)

    @staticmethod
    def _refuse(split: str) -> None:
        if split not in (ONE_SIDED, "half"):
            raise InvalidValue("split", "be half for a measurement", split)


class ExactLaw(Protocol):
    """One law at one decimal rate, for comparisons that floats cannot decide."""

    def compare(self, tails: Iterable[tuple[int, str, int]], bound: Fraction) -> int:
        """Return the sign of a weighted sum of tails minus a bound.

        Parameters
        ----------
        tails : iterable of (weight, end, x)
            End ``"low"`` stands for P(X <= x), ``"high"`` for P(X >= x).
        bound : Fraction
            What the sum is compared with, e.g. alpha.
        """

    def compare_counts(self, x: int, y: int) -> int:
        """Return the sign of P(X = x) - P(X = y)."""


class CountLaw(Law):
    """The law of a count, a whole number from 0.

    Attributes
    ----------
    amount : str
        The column that says how much is inspected, e.g. ``"n"``.
    divisible : bool
        Whether the amount may be any positive number, unlike a number of items.
    """

    step = 1
    amount: str
    divisible = False

    @abstractmethod
    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X = x)."""

    @abstractmethod
    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the law of one design, its fields given by name, at a decimal rate."""

    def valley(self, columns: Columns, low: float, high: float) -> float:
        """Return where a region of two ends has the least power; NaN where that is not known.

        Parameters
        ----------
        columns : dict
            The fields of one design.
        low, high : float
            The region: counts of at most `low` and of at least `high`.
        """
        del columns, low, high
        return math.nan

    @abstractmethod
    def largest(self, columns: Columns) -> Any:
        """Return the greatest amount that a plan may inspect."""

    def share(self, columns: Columns, rate: Floats) -> Floats:
        """Return the expected count per unit of the amount."""
        del columns
        return rate

    def pace(self, x: Any, columns: Columns, rate: Floats) -> Floats:
        """Return the chance, per unit, of one more event in what is inspected next, after `x` events."""
        del x
        return self.share(columns, rate)

    def leans_high(self, rate: float) -> bool:
        """Tell whether the upper tail surely falls more slowly than the lower one, at every amount."""
        del rate
        return False

    def divergence(self, share: Floats, expected: Floats) -> Floats:
        """Return how fast the chance falls of a count per unit that lies away from the expected one.

        Over an amount n that chance is at most ``exp(-n divergence)``: Chernoff's bound, here for counts of
        at most 1 per unit (W. Hoeffding, J. Amer. Statist. Assoc. 58, 1963, from memory; it holds for
        draws without replacement too).
        """
        return _relative(share, expected) + _relative(1.0 - share, 1.0 - expected)

    def most(self, columns: Columns) -> Any:
        """Return the greatest possible count."""
        return columns[self.amount]

    def support(self, design: Any) -> tuple[float, float]:
        """Return 0 and the greatest possible count."""
        return 0, self.most({self.amount: getattr(design, self.amount)})

    def critical(self, columns: Columns, rate: Floats, alpha: Any, end: str, split: str) -> Floats:
        """Return the critical counts, ties with alpha decided exactly."""
        find = splits.critical_low if end == "low" else splits.critical_high
        return find(self, columns, rate, alpha, split)

    def p_value(self, columns: Columns, rate: Floats, x: Floats, side: str, split: str) -> Floats:
        """Return the p-value as `steelyard.core.splits` defines it."""
        return splits.p_value(self, columns, rate, x, side, split)

    def nested(
        self, columns: Columns, rate: Floats, low: float | None, high: float | None, split: str
    ) -> bool:
        """Tell whether every count that is rejected has a smaller p-value than any that is not."""
        inner_high = self.most(columns) if high is None else high - 1
        if math.isinf(inner_high):
            return False
        inner = [0.0 if low is None else low + 1, inner_high]
        outer = [x for x in (low, high) if x is not None]
        p = self.p_value(columns, rate, np.array([*outer, *inner], dtype=float), "either", split)
        return bool(p[: len(outer)].max() < p[len(outer) :].min() * (1 - splits.NEAR))

    def algebra(self, design: Any, rule: Reject) -> str | None:
        """Return the power of a rule as algebra, or None where there is none."""
        del design, rule
        return None

    def native(self, design: Any, rule: Reject, cell: str) -> str | None:
        """Return a formula of the spreadsheet's own functions for the power at `cell`, or None."""
        del design, rule, cell
        return None

    def prior(self, design: Any, a: float, b: float) -> Prior:
        """Return what `a` and `b` say of an uncertain rate, in the family of priors that fits the law.

        Raises
        ------
        NoAnswer
            When there is no such family.
        """
        del design, a, b
        message = (
            "no closed form for the power over an uncertain rate where inspection errs or defects cluster"
        )
        raise NoAnswer(message)

    @abstractmethod
    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return the confidence limit ``"lower"`` or ``"upper"`` of the rate, at confidence 1 - miss."""


class RateLaw(CountLaw):
    """The law of a count whose rate may take any value from 0 to `greatest_rate`.

    Attributes
    ----------
    greatest_rate : float
        In the parameter's unit; may be infinite.
    """

    greatest_rate: float

    @abstractmethod
    def tail_rate(self, x: float, columns: Columns, end: str, prob: float) -> float:
        """Return about the rate at which the tail from `x` outwards has a probability."""

    @abstractmethod
    def even_rate(self, x: float, others: Floats, columns: Columns) -> Floats:
        """Return the rates at which the count `x` is just as probable as each other count."""

    @abstractmethod
    def variance(self, columns: Columns, rate: float) -> float:
        """Return at least the variance of the count at this and every smaller rate."""

    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit as `steelyard.core.limits` defines it."""
        return limits.rate_limit(self, row, x, end, miss, split)


class UnboundedCountLaw(RateLaw):
    """The law of a count that has no greatest value."""

    greatest_rate = math.inf

    def most(self, columns: Columns) -> Any:
        """Return infinity."""
        del columns
        return math.inf

    def leans_high(self, rate: float) -> bool:
        """Return True."""
        del rate
        return True

    def divergence(self, share: Floats, expected: Floats) -> Floats:
        """Return Chernoff's exponent for a Poisson count."""
        return _relative(share, expected) - share + expected


def running_means(x: float, others: Floats, term: Callable[[Floats], Floats]) -> Floats:
    """Return the mean of ``term(k)`` over the whole numbers k after the smaller of x and y, up to the larger.

    Parameters
    ----------
    x : float
    others : ndarray of float
        The numbers y, all on one side of `x`.
    term : callable
    """
    distance = np.abs(others - x)
    steps = np.arange(1, distance.max() + 1)
    sums = np.cumsum(term(x + steps if others[0] > x else x + 1 - steps))
    return sums[distance.astype(np.intp) - 1] / distance


def _relative(share: Floats, expected: Floats) -> Floats:
    """Return ``share log(share / expected)``: 0 without a share, very large where none is expected."""
    return share * np.log(np.maximum(share, _TINY) / np.maximum(expected, _TINY))
