"""The law of what is not counted: the good items, where defectives are counted.

A search that goes from count to count is short where few are counted. So rates near 1 are searched by the
others, which then are few.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from steelyard.core.law import CountLaw, ExactLaw
from steelyard.core.parameter import Columns, Floats

_SIDES = {"low": "high", "high": "low"}


class Others(CountLaw):
    """How many of n items do not count, at the rate of those that do.

    Parameters
    ----------
    law : CountLaw
        The law of the items that count, at most all of them.
    """

    def __init__(self, law: CountLaw) -> None:
        self.law, self.statistic, self.amount = law, law.statistic, law.amount

    def _rest(self, x: Any, columns: Columns) -> Any:
        return columns[self.amount] - x

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance that at most `x` do not count."""
        return self.law.at_least(self._rest(x, columns), columns, *rates)

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance that at least `x` do not count."""
        return self.law.at_most(self._rest(x, columns), columns, *rates)

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance that `x` do not count."""
        return self.law.exactly(self._rest(x, columns), columns, *rates)

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the exact law."""
        return _ExactOthers(self.law.exact(row, rate), int(row[self.amount]))

    def largest(self, columns: Columns) -> Any:
        """Return the greatest amount that a plan may inspect."""
        return self.law.largest(columns)

    def share(self, columns: Columns, rate: Floats) -> Floats:
        """Return the expected share of what does not count."""
        return 1.0 - self.law.share(columns, rate)

    def pace(self, x: Any, columns: Columns, rate: Floats) -> Floats:
        """Return the chance that the next item does not count, where `x` did not."""
        return 1.0 - self.law.pace(self._rest(x, columns), columns, rate)

    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return the limit that the items which do count give."""
        return self.law.limit(row, float(row[self.amount]) - x, end, miss, split)


@dataclass(frozen=True, slots=True)
class _ExactOthers:
    """The exact law of what does not count."""

    law: ExactLaw
    amount: int

    def compare(self, tails: Iterable[tuple[int, str, int]], bound: Fraction) -> int:
        """Return the sign of a weighted sum of tails minus a bound."""
        return self.law.compare([(weight, _SIDES[end], self.amount - x) for weight, end, x in tails], bound)

    def compare_counts(self, x: int, y: int) -> int:
        """Return the sign of P(X = x) - P(X = y)."""
        return self.law.compare_counts(self.amount - x, self.amount - y)
