"""The numbers of switching rules, and how people write them."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import read_choice, read_number, read_whole, write_number

_NEVER = "never"


@dataclass(frozen=True, slots=True)
class Rules:
    """The numbers of the switching rules.

    Parameters
    ----------
    tighten, within : int
        Lots not accepted, of so many successive ones, that call for tightened inspection.
    resume : int
        Lots accepted in a row that bring normal inspection back.
    stop : int or None
        Lots not accepted under tightened inspection that discontinue it; None for never.
    reduce, by : float or None, float
        The score that calls for reduced inspection, None for never; what an accepted lot adds to it.
    """

    tighten: int = 2
    within: int = 5
    resume: int = 5
    stop: int | None = 5
    reduce: float | None = 30.0
    by: float = 2.0

    def __post_init__(self) -> None:
        if self.tighten > self.within:
            raise InvalidValue(
                "tighten", "name no more lots than it looks at", f"{self.tighten} of {self.within}"
            )

    def __str__(self) -> str:
        stop = _NEVER if self.stop is None else self.stop
        reduce = _NEVER if self.reduce is None else f"{write_number(self.reduce)} by {write_number(self.by)}"
        return (
            f"tighten {self.tighten} of {self.within} | resume {self.resume} | stop {stop} | reduce {reduce}"
        )

    @property
    def steps(self) -> int:
        """How many lots in a row reach the score."""
        return 0 if self.reduce is None else math.ceil(self.reduce / self.by)


STANDARD = Rules()
"""Of ISO 2859-1 (from memory), for plans that accept on 0 or 1; others score 3, and by a score plan."""


def read_rules(text: str) -> Rules:
    """Return the rules in ``tighten 2 of 5 | resume 5 | stop 5 | reduce 30 by 2``, left-out fields as there.

    Raises
    ------
    InvalidValue
        Naming the field and its form.

    Examples
    --------
    >>> str(read_rules("tighten 2 of 4 | stop never"))
    'tighten 2 of 4 | resume 5 | stop never | reduce 30 by 2'
    """
    values: dict[str, Any] = {}
    for part in text.lower().split("|"):
        word, _, rest = " ".join(part.split()).partition(" ")
        word = read_choice(word, "rules", tuple(_READERS))
        if word in values:
            raise InvalidValue(word, "be written once", text)
        values.update(_READERS[word](rest, word))
    return Rules(**values)


def _read_tighten(text: str, name: str) -> dict[str, Any]:
    match = re.fullmatch(r"(\S+) of (\S+)", text)
    if match is None:
        raise InvalidValue(name, "have the form 2 of 5", text)
    return {name: read_whole(match[1], name, 1), "within": read_whole(match[2], name, 1)}


def _read_reduce(text: str, name: str) -> dict[str, Any]:
    if text == _NEVER:
        return {name: None}
    score, _, by = text.partition(" by ")
    numbers = {name: read_number(score, name), "by": read_number(by, name) if by else 1.0}
    if min(numbers.values()) <= 0:
        raise InvalidValue(name, "have the form 30 by 2, both above 0", text)
    return numbers


_READERS = {
    "tighten": _read_tighten,
    "resume": lambda text, name: {name: read_whole(text, name, 1)},
    "stop": lambda text, name: {name: None if text == _NEVER else read_whole(text, name, 1)},
    "reduce": _read_reduce,
}
