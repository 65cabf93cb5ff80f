"""What a plan that compares one statistic with limits needs: the statistic's two tails."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Iterable, Mapping
from fractions import Fraction
from typing import Any, Protocol

import numpy as np

from steelyard.core.parameter import Columns, Floats

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
    """The law of a count 0, 1, 2 …

    Attributes
    ----------
    amount : str
        The column that says how much is inspected, e.g. ``"n"``.
    """

    step = 1
    amount: str

    @abstractmethod
    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X = x)."""

    @abstractmethod
    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the law of one design, its fields given by name, at a decimal rate."""

    @abstractmethod
    def largest(self, columns: Columns) -> Any:
        """Return the greatest amount that a plan may inspect."""

    def share(self, columns: Columns, rate: Floats) -> Floats:
        """Return the expected count per unit of the amount."""
        del columns
        return rate

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


class UnboundedCountLaw(CountLaw):
    """The law of a count that has no greatest value."""

    def most(self, columns: Columns) -> Any:
        """Return infinity."""
        del columns
        return math.inf

    def divergence(self, share: Floats, expected: Floats) -> Floats:
        """Return Chernoff's exponent for a Poisson count."""
        return _relative(share, expected) - share + expected


def _relative(share: Floats, expected: Floats) -> Floats:
    """Return ``share log(share / expected)``; 0 where there is no share, very large where none is expected."""
    return share * np.log(np.maximum(share, _TINY) / np.maximum(expected, _TINY))
