"""Samples in stages: their sizes, and the numbers that accept or reject after each."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import read_choice, read_number, read_whole, write_number
from steelyard.core.walk import NONE, Look

MOST_STAGES = 20
MOST_FOUND = 500  # the largest reject number: it bounds the counts to follow, so that no cell has to wait
MOST_IN_LOT = 1_000_000
MOST_FOUND_EARLY = 50  # the same where every item may end the inspection
STOPS = ("stage-end", "on-reject", "on-decision")

Numbers = tuple[int | None, ...]


@dataclass(frozen=True, slots=True)
class Stages:
    """Stages of items.

    Parameters
    ----------
    stages : tuple of float
        How much each stage inspects.
    stop : {"stage-end", "on-reject", "on-decision"}
        Every stage is inspected to its end; or inspection stops inside a stage as soon as the lot must be
        rejected; or as soon as the stage's end can bring only acceptance, or only rejection.
    """

    stages: tuple[float, ...]
    stop: str

    most: ClassVar[float] = 10_000_000

    def __post_init__(self) -> None:
        if not 1 <= len(self.stages) <= MOST_STAGES:
            raise InvalidValue("stages", f"be {MOST_STAGES} at most", len(self.stages))
        if self.total > self.most:
            raise InvalidValue("stages", f"need {self.most:.0f} at most in all", self.total)

    @property
    def total(self) -> float:
        """How much is inspected if every stage is needed."""
        return math.fsum(self.stages)


@dataclass(frozen=True, slots=True)
class UnitStages(Stages):
    """Stages of units, of which there may be any positive number."""

    most: ClassVar[float] = 1e9

    def __post_init__(self) -> None:
        Stages.__post_init__(self)
        if self.stop == "on-decision":
            hint = "no end of a stage is certain to accept before it comes"
            raise InvalidValue("stop", "be stage-end or on-reject where defects are counted", self.stop, hint)


@dataclass(frozen=True, slots=True)
class LotStages(Stages):
    """Stages of items drawn from one finite lot without replacement."""

    lot: int

    def __post_init__(self) -> None:
        Stages.__post_init__(self)
        if not 2 <= self.lot <= MOST_IN_LOT:
            raise InvalidValue("lot", f"be a whole number from 2 to {MOST_IN_LOT}", self.lot)
        if self.total > self.lot:
            raise InvalidValue("stages", f"need {self.lot} items at most in all, the lot", self.total)


@dataclass(frozen=True, slots=True)
class StageRule:
    """Acceptance and rejection numbers after each stage, for all defectives found so far.

    Parameters
    ----------
    accept : tuple of int or None
        The lot passes up to this count; None where it can't pass yet.
    reject : tuple of int or None
        It fails from this count on; None where it can't fail yet.
    """

    accept: Numbers
    reject: Numbers

    def check(self, most: int = MOST_FOUND) -> None:
        """Refuse numbers that fall from stage to stage, stages that leave nothing open, a last one that does.

        Raises
        ------
        InvalidValue
        """
        last = self.reject[-1]
        if last is None or self.accept[-1] != last - 1:
            rule = "end with the last acceptance number plus 1"
            raise InvalidValue("reject", rule, write_list(self.reject))
        if last > most:
            raise InvalidValue("reject", f"end with {most} at most", last)
        for name, numbers in (("accept", self.accept), ("reject", self.reject)):
            known = [number for number in numbers if number is not None]
            if known != sorted(known):
                raise InvalidValue(name, "not fall from stage to stage", write_list(numbers))
        for stage, (accept, reject) in enumerate(zip(self.accept[:-1], self.certain, strict=False), 1):
            if reject - (NONE if accept is None else accept) < 2:
                rule = f"leave some count open after stage {stage}, to go on with"
                raise InvalidValue("accept and reject", rule, f"{write_list([accept])} and {reject}")

    @property
    def certain(self) -> tuple[int, ...]:
        """The counts from which on rejection is certain, if only at a later stage."""
        found: list[int] = []
        for number in reversed(self.reject):
            found.append(number if number is not None else found[-1])
        return tuple(reversed(found))

    def looks(self, stages: Sequence[float]) -> tuple[Look, ...]:
        """Return the looks at the stages' ends."""
        ends = [math.fsum(stages[: i + 1]) for i in range(len(stages))]
        accept = (NONE if number is None else number for number in self.accept)
        return tuple(map(Look, ends, accept, self.certain))

    def item_looks(self, stages: Sequence[float]) -> tuple[Look, ...]:
        """Return all items after which the rest of their stage can't change its verdict any more.

        Towards a stage's end acceptance is certain once the defectives found and all the items still to come
        are no more than the acceptance number.
        """
        found: list[Look] = []
        start = 0.0
        for end in self.looks(stages):
            first = max(start + 1, end.amount - max(end.accept, 0))
            found += [
                Look(first + i, end.accept - int(end.amount - first) + i, end.reject)
                for i in range(int(end.amount - first) + 1)
            ]
            start = end.amount
        return tuple(found)

    def cut(self, stage: int, count: int) -> StageRule:
        """Return the rule that ends after a stage and rejects just what is at least as extreme as a count.

        Outcomes are ordered by stage: rejected the earlier, the more extreme; accepted the earlier, the less;
        of one stage the larger count (C. Jennison and B. W. Turnbull, Group Sequential Methods, 2000, ch. 8,
        from memory). All that is more extreme than a count after this stage is then what an earlier stage
        rejects, or what goes on to this stage and comes to at least the count.
        """
        before = (None if number is None else min(number, count) for number in self.reject[: stage - 1])
        return StageRule((*self.accept[: stage - 1], count - 1), (*before, count))


def read_sizes(value: Any, name: str) -> tuple[int, ...]:
    """Return the numbers of items in ``50 then 50``."""
    return tuple(read_whole(part, name, 1) for part in parts_of(value))


def read_amounts(value: Any, name: str) -> tuple[float, ...]:
    """Return the units in ``12.5 then 12.5``."""
    found = tuple(read_number(part, name) for part in parts_of(value))
    if min(found) <= 0:
        raise InvalidValue(name, "be greater than 0", value)
    return found


def read_stop(value: Any, name: str) -> str:
    """Return when inspection stops."""
    return read_choice(value, name, STOPS)


def read_counts(text: str | None, name: str, stages: int) -> Numbers:
    """Return the numbers in ``none then 1 then 3``, one for each stage.

    Raises
    ------
    InvalidValue
        When the field is missing, or has another number of numbers.
    """
    if text is None:
        raise InvalidValue(name, f"be written in the plan, e.g. {name} 1 then 4", None)
    found = tuple(
        None if str(part).strip().lower() == "none" else read_whole(part, name) for part in parts_of(text)
    )
    if len(found) != stages:
        each = "the stage" if stages == 1 else f"each of the {stages} stages"
        raise InvalidValue(name, f"give one number, or none, for {each}", text)
    return found


def parts_of(value: Any) -> list[Any]:
    """Return what stands between the ``then`` of a list."""
    return value.lower().split(" then ") if isinstance(value, str) else [value]


def write_list(numbers: Sequence[float | None]) -> str:
    """Return a list as plan text writes it.

    Examples
    --------
    >>> write_list((None, 1, 3))
    'none then 1 then 3'
    """
    return " then ".join("none" if number is None else write_number(number) for number in numbers)
