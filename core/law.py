"""What a plan that compares one statistic with limits needs: the statistic's two tails."""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import Any

from steelyard.core.parameter import Columns, Floats


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
