"""An inspector who follows a plan item by item, and every lot that may come before him.

Nothing is shared with the code under test: sequences of good and defective items are written out one by one,
and chances are fractions.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from math import comb

Items = Sequence[int]  # 1 is a defective


@dataclass(frozen=True)
class Verdict:
    """What became of a lot: passed or not, after how many items, with how many defectives found."""

    passed: bool
    items: int
    found: int


Inspector = Callable[[Items], Verdict]


def staged(sizes: Items, accept: Sequence[int | None], reject: Sequence[int | None], stop: str) -> Inspector:
    """Return the inspector of a plan in stages."""

    def inspect(items: Items) -> Verdict:
        found = taken = end = 0
        for stage, size in enumerate(sizes):
            end += size
            certain = next(number for number in reject[stage:] if number is not None)
            while taken < end:
                found, taken = found + items[taken], taken + 1
                if stop != "stage-end" and found >= certain:
                    return Verdict(False, taken, found)
                limit = accept[stage]
                if stop == "on-decision" and limit is not None and found + end - taken <= limit:
                    return Verdict(True, taken, found)
            if reject[stage] is not None and found >= reject[stage]:
                return Verdict(False, taken, found)
            if accept[stage] is not None and found <= accept[stage]:
                return Verdict(True, taken, found)
        raise AssertionError("the last stage decides")

    return inspect


def sequential(slope: Fraction, low: Fraction, high: Fraction, most: int, at_end: int) -> Inspector:
    """Return the inspector who compares the count with two lines after every item."""

    def inspect(items: Items) -> Verdict:
        found = 0
        for taken in range(1, most + 1):
            found += items[taken - 1]
            if found >= slope * taken + high:
                return Verdict(False, taken, found)
            if found <= slope * taken + low:
                return Verdict(True, taken, found)
        return Verdict(found <= at_end, most, found)

    return inspect


@dataclass(frozen=True)
class Tally:
    """The verdicts on all sequences of so many items, counted by verdict and defectives in the sequence."""

    items: int
    counts: Counter[tuple[Verdict, int]]

    @classmethod
    def of(cls, items: int, inspect: Inspector) -> Tally:
        """Show every sequence to an inspector."""
        sequences = product((0, 1), repeat=items)
        return cls(items, Counter((inspect(sequence), sum(sequence)) for sequence in sequences))

    def mean(self, rate: Fraction, question: Callable[[Verdict, int], int]) -> Fraction:
        """Return the mean of a question about verdict and defectives, if items come from a process."""
        return sum(
            (
                number * rate**ones * (1 - rate) ** (self.items - ones) * question(verdict, ones)
                for (verdict, ones), number in self.counts.items()
            ),
            Fraction(0),
        )

    def mean_of_lots(self, defectives: int, question: Callable[[Verdict, int], int]) -> Fraction:
        """Return the mean over all orders of a lot with so many defectives."""
        answers = [
            number * question(verdict, ones)
            for (verdict, ones), number in self.counts.items()
            if ones == defectives
        ]
        return Fraction(sum(answers), comb(self.items, defectives))
