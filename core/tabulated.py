"""Laws of counts whose tails have no closed form: the chances of all counts are tabulated and added up.

Every entry of a table is a sum of products of chances, never a difference; the lower tails are added up from
the bottom and the upper ones from the top. So small tails keep their digits.
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import accumulate
from typing import Any

import numpy as np

from steelyard.core.law import CountLaw
from steelyard.core.parameter import Columns, Floats

_KEPT, _KEPT_LARGE = 512, 8  # tables of one rate, tables of many


@dataclass(frozen=True, slots=True)
class Table:
    """The chances of the counts 0, 1, 2 … (columns) at several rates (rows), and their sums."""

    exactly: Floats
    at_most: Floats
    at_least: Floats

    @classmethod
    def of(cls, chances: Floats) -> Table:
        """Return the table of chances, of shape ``(rates, counts)``."""
        above = np.cumsum(chances[:, ::-1], axis=1)[:, ::-1]
        return cls(chances, np.minimum(np.cumsum(chances, axis=1), 1.0), np.minimum(above, 1.0))


class TabulatedLaw(CountLaw):
    """A law given by the chances of all its counts.

    Attributes
    ----------
    fields : tuple of str
        The design's fields that the table depends on.
    """

    fields: tuple[str, ...]

    @abstractmethod
    def chances(self, row: tuple[float, ...], rates: Floats) -> Floats:
        """Return the chances of the counts 0, 1, 2 … for a design.

        Parameters
        ----------
        row : tuple of float
            The values of `fields`.
        rates : ndarray of float, shape (rates,)

        Returns
        -------
        ndarray of float, shape (rates, counts)
        """

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X <= x)."""
        return self._look_up("at_most", x, columns, rates[0], 0.0, 1.0)

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X >= x)."""
        return self._look_up("at_least", x, columns, rates[0], 1.0, 0.0)

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X = x)."""
        return self._look_up("exactly", x, columns, rates[0], 0.0, 0.0)

    def _look_up(
        self, part: str, x: Any, columns: Columns, rate: Floats, below: float, above: float
    ) -> Floats:
        """Read tables, one for each distinct design; `below` and `above` are the values beyond the counts."""
        given = np.broadcast_arrays(x, rate, *(columns[name] for name in self.fields))
        count, at, *rows = (np.asarray(array, dtype=float).ravel() for array in given)
        designs, which = np.unique(np.array(rows), axis=1, return_inverse=True)
        found = np.empty(count.size)
        for number, design in enumerate(designs.T):
            places = np.flatnonzero(which.ravel() == number)
            distinct, line = np.unique(at[places], return_inverse=True)
            find = _table if distinct.size == 1 else _large_table
            table = getattr(find(self, tuple(design.tolist()), tuple(distinct.tolist())), part)
            wanted, last = count[places], table.shape[1] - 1
            inside = table[line.ravel(), np.clip(wanted, 0, last).astype(np.intp)]
            found[places] = np.where(wanted < 0, below, np.where(wanted > last, above, inside))
        return found.reshape(given[0].shape)[()]


def _tabulate(law: TabulatedLaw, row: tuple[float, ...], rates: tuple[float, ...]) -> Table:
    return Table.of(law.chances(row, np.array(rates)))


_table, _large_table = lru_cache(_KEPT)(_tabulate), lru_cache(_KEPT_LARGE)(_tabulate)


@dataclass(frozen=True, slots=True)
class WeightedCounts:
    """An exact law of counts: a chance is a whole-number weight over the sum of all weights."""

    weights: tuple[int, ...]

    def compare(self, tails: Iterable[tuple[int, str, int]], bound: Fraction) -> int:
        """Return the sign of a weighted sum of tails minus a bound; see `steelyard.core.law.ExactLaw`.

        Examples
        --------
        >>> WeightedCounts((1, 2, 1)).compare([(1, "high", 2)], Fraction("0.25"))
        0
        """
        sums = [0, *accumulate(self.weights)]
        top = 0
        for weight, end, x in tails:
            below = sums[min(max(x + 1 if end == "low" else x, 0), len(self.weights))]
            top += weight * (below if end == "low" else sums[-1] - below)
        return _sign(top * bound.denominator - sums[-1] * bound.numerator)

    def compare_counts(self, x: int, y: int) -> int:
        """Return the sign of P(X = x) - P(X = y)."""
        return _sign(self._weight(x) - self._weight(y))

    def _weight(self, x: int) -> int:
        return self.weights[x] if 0 <= x < len(self.weights) else 0


def digits_of(packed: int, count: int, width: int) -> tuple[int, ...]:
    """Return a polynomial's coefficients from its value at ``256 ** width``, which exceeds each of them.

    Examples
    --------
    >>> digits_of((1 + 256) ** 3, 4, 1)
    (1, 3, 3, 1)
    """
    raw = packed.to_bytes(count * width, "little")
    return tuple(int.from_bytes(raw[k * width : (k + 1) * width], "little") for k in range(count))


def _sign(value: int) -> int:
    return (value > 0) - (value < 0)
