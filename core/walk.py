"""How a sample ends that is inspected part by part: by acceptance or rejection, and after how much.

The count of defectives grows from look to look; each look compares it with an acceptance and a rejection
number. The chances of the counts in between are carried on by counting paths: sums of products only, never
differences, so small probabilities keep their digits.

A plan that may stop at any item needs no look at every item. The count never falls, so while the rejection
number stays the same, a lot that is rejected anywhere in a part is one whose count has reached that number
at the part's end. Looks are needed only where one of the two numbers changes.

References
----------
M. A. Girshick, F. Mosteller and L. J. Savage, Ann. Math. Statist. 17 (1946), 13-23, for counting paths;
L. A. Aroian, Technometrics 10 (1968), 125-132, for the direct method in sequential plans (both from memory).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cache, cached_property

import numpy as np
from numpy.lib.stride_tricks import as_strided
from numpy.typing import NDArray

from steelyard.core import tails
from steelyard.core.law import CountLaw
from steelyard.core.parameter import Columns, Floats

Counts = NDArray[np.intp]

NONE = -1
"""The acceptance number of a look that accepts nothing."""


@dataclass(frozen=True, slots=True)
class Look:
    """A comparison of the count with two numbers.

    Parameters
    ----------
    amount : float
        Items, or units, inspected so far.
    accept : int
        The lot is accepted up to this count; `NONE` where it is not accepted yet.
    reject : int
        It is rejected from this count on. At the last look ``accept + 1``.
    """

    amount: float
    accept: int
    reject: int


class Course(ABC):
    """The counts that no look has decided yet, and their chances.

    Parameters
    ----------
    rate : ndarray of float, shape (rates,)
        The parameter of the law.
    """

    def __init__(self, rate: Floats) -> None:
        self.rate = rate
        self.amount = 0.0
        self.counts = np.zeros(1, dtype=np.intp)

    @property
    @abstractmethod
    def chance(self) -> Floats:
        """The chances of the counts, one row for each, at all rates."""

    def accepted(self, look: Look) -> Floats:
        """Return the chance of being accepted at the next look."""
        total: Floats = self._moved(self._accepted_counts(look), look.amount).sum(axis=0)
        return total

    def rejected(self, look: Look) -> Floats:
        """Return the chance of being rejected there, or on the way there."""
        total: Floats = (self.chance * self._at_least(look.reject - self.counts, look.amount)).sum(axis=0)
        return total

    def spent(self, look: Look) -> Floats:
        """Return the expected amount inspected on the way to a look, all the way."""
        total: Floats = (look.amount - self.amount) * self.chance.sum(axis=0)
        return total

    def spent_early(self, look: Look) -> Floats:
        """Return the expected amount inspected on the way to a look, at most until the count rejects."""
        total: Floats = (self.chance * self._wait(look.reject - self.counts, look.amount)).sum(axis=0)
        return total

    def go_on(self, look: Look) -> None:
        """Pass the look with the counts that it leaves undecided."""
        counts = np.arange(max(int(self.counts[0]), look.accept + 1), look.reject)
        self._keep(counts, look.amount)
        self.counts, self.amount = counts, look.amount

    def _accepted_counts(self, look: Look) -> Counts:
        return np.arange(self.counts[0], look.accept + 1)

    @abstractmethod
    def _keep(self, counts: Counts, amount: float) -> None:
        """Remember what the chances of counts will be when `amount` has been inspected."""

    @abstractmethod
    def _moved(self, counts: Counts, amount: float) -> Floats:
        """Return the chances of counts when `amount` will have been inspected."""

    @abstractmethod
    def _at_least(self, more: Counts, amount: float) -> Floats:
        """Return the chance that by then at least so many more are found, beside each of the counts."""

    @abstractmethod
    def _wait(self, more: Counts, amount: float) -> Floats:
        """Return the expected amount inspected until so many more are found, but until then at most."""


class ProcessCourse(Course):
    """Counts from a process: what is found next does not depend on what was found before."""

    def __init__(self, law: CountLaw, rate: Floats, looks: Sequence[Look]) -> None:
        super().__init__(rate)
        self._chance = np.ones((1, rate.size))
        lowest = np.maximum.accumulate([0, *(look.accept + 1 for look in looks[:-1])])
        widest = max(look.reject - low for look, low in zip(looks, lowest, strict=True))
        self._part = cache(lambda step: _Part(law, step, rate, int(widest)))

    @property
    def chance(self) -> Floats:
        """The chances of the counts."""
        return self._chance

    def _keep(self, counts: Counts, amount: float) -> None:
        self._chance = self._moved(counts, amount)

    def _moved(self, counts: Counts, amount: float) -> Floats:
        if not counts.size:
            return np.zeros((0, self.rate.size))
        # ways[i, j] is the row for counts[i] - self.counts[j] more: a view, not a copy
        rows = self._part(amount - self.amount).signed
        down, along = rows.strides
        start = rows[len(rows) // 2 + counts[0] - self.counts[0] :]
        shape = (counts.size, self.counts.size, self.rate.size)
        moved: Floats = np.einsum("ijr,jr->ir", as_strided(start, shape, (down, -down, along)), self.chance)
        return moved

    def _at_least(self, more: Counts, amount: float) -> Floats:
        return self._part(amount - self.amount).upper[np.maximum(more, 0)]

    def _wait(self, more: Counts, amount: float) -> Floats:
        return self._part(amount - self.amount).waits[np.maximum(more, 0)]


@dataclass(frozen=True)
class _Part:
    """What one part of the sample may show; rows are the counts 0, 1 … `most`."""

    law: CountLaw
    step: float
    rate: Floats
    most: int

    @cached_property
    def points(self) -> Floats:
        """The chance of each count below `most`."""
        return self.law.exactly(np.arange(self.most)[:, None], self._columns(), self.rate)

    @cached_property
    def signed(self) -> Floats:
        """The chances of the counts from ``-most`` to ``most - 1``: zeros, then `points`."""
        return np.vstack([np.zeros_like(self.points), self.points])

    @cached_property
    def upper(self) -> Floats:
        """The chance of at least each count."""
        beyond = self.law.at_least(np.full((1, 1), self.most), self._columns(), self.rate)
        return np.minimum(np.cumsum(np.vstack([beyond, self.points[::-1]]), axis=0)[::-1], 1.0)

    @cached_property
    def waits(self) -> Floats:
        """The expected amount until each count is reached, if only at the part's end.

        For the time T of the y-th find that is E min(T, step) = E(T; T <= step) + step P(T > step).
        """
        count = np.arange(self.most + 1)[:, None]
        if self.step == 1 and not self.law.divisible:
            return np.broadcast_to(np.minimum(count, 1.0), (count.size, self.rate.size))
        found = self.law.at_least(count + 1, self._columns(0 if self.law.divisible else 1), self.rate)
        before = np.divide(count * found, self.rate, out=np.zeros(found.shape), where=self.rate > 0)
        return before + self.step * self.law.at_most(count - 1, self._columns(), self.rate)

    def _columns(self, more: float = 0) -> Columns:
        return {self.law.amount: np.asarray(self.step + more)}


class LotCourse(Course):
    """Counts from a finite lot, drawn without replacement.

    Given the count at a look, the items before it may have come in any order. So the chance that no earlier
    look has decided does not depend on the lot's defectives: it is a weight, carried from look to look.
    """

    def __init__(self, lot: float, rate: Floats) -> None:
        super().__init__(rate)
        self.lot = lot
        self._weights = np.ones(1)

    @property
    def chance(self) -> Floats:
        """The weights of the counts times what the lot gives them."""
        point = tails.hypergeometric_pmf(self.counts[:, None], self.lot, self.rate, self.amount)
        return self._weights[:, None] * point

    def _keep(self, counts: Counts, amount: float) -> None:
        self._weights = self._weights_at(counts, amount)

    def left(self, look: Look) -> Floats:
        """Return the expected defectives left among the items not drawn, where the next look accepts."""
        counts = self._accepted_counts(look)
        total: Floats = ((self.rate - counts[:, None]) * self._moved(counts, look.amount)).sum(axis=0)
        return total

    def _weights_at(self, counts: Counts, amount: float) -> Floats:
        ways = tails.hypergeometric_pmf(self.counts, amount, counts[:, None], self.amount)
        return np.asarray(ways @ self._weights)

    def _moved(self, counts: Counts, amount: float) -> Floats:
        point = tails.hypergeometric_pmf(counts[:, None], self.lot, self.rate, amount)
        return self._weights_at(counts, amount)[:, None] * point

    def _at_least(self, more: Counts, amount: float) -> Floats:
        rest, left = self._rest()
        return tails.hypergeometric_at_least(more[:, None], rest, left, amount - self.amount)

    def _wait(self, more: Counts, amount: float) -> Floats:
        (rest, left), step, count = self._rest(), amount - self.amount, more[:, None]
        if step == 1:
            return np.ones(left.shape)
        found = tails.hypergeometric_at_least(count + 1, rest + 1, left + 1, step + 1)
        missed = tails.hypergeometric_at_most(count - 1, rest, left, step)
        return count * (rest + 1) / (left + 1) * found + step * missed

    def _rest(self) -> tuple[float, Floats]:
        """Return the items not yet drawn, and the defectives among them, beside each of the counts."""
        rest = self.lot - self.amount
        return rest, np.clip(self.rate - self.counts[:, None], 0, rest)


def along(looks: Sequence[Look], course: Course, question: Callable[[Look], Floats]) -> Floats:
    """Ask a course at each look how it ends there.

    Parameters
    ----------
    looks : sequence of Look
        By rising amount; the last decides on every count.
    course : Course
        At its beginning.
    question : callable
        Such as ``course.rejected``.

    Returns
    -------
    ndarray of float, shape (looks, rates)
        Up to the look that leaves no count undecided.

    Examples
    --------
    The chances of rejection at each stage of 50 then 50 items, with 1 then 4 accepted and 4 then 5 rejected:

    >>> from steelyard.core.kinds.binomial import BINOMIAL
    >>> looks = [Look(50, 1, 4), Look(100, 4, 5)]
    >>> course = ProcessCourse(BINOMIAL.law, np.array([0.05]), looks)
    >>> along(looks, course, course.rejected).round(4).tolist()
    [[0.2396], [0.2784]]
    """
    found = []
    for look in looks:
        found.append(question(look))
        if look is looks[-1]:
            break
        course.go_on(look)
        if not course.counts.size:
            break
    return np.array(found)
