"""Sequential plans: two parallel lines that the count of defectives is compared with after every item."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import read_number, read_whole, typed, write_number
from steelyard.core.walk import NONE, Look

MOST_ITEMS = 1_000_000
MOST_FOUND = 150  # the largest reject number, and
MOST_OPEN = 60  # the most counts between the lines: they bound the work, so that no cell has to wait

_NUMBER = r"(?:\d+\.?\d*|\.\d+)(?:e[-+]?\d+)?"
_LINE = re.compile(rf"x(<=|>=)({_NUMBER})\*n(?:([+-])({_NUMBER}))?")
_RELATIONS = {"accept": "<=", "reject": ">="}


@dataclass(frozen=True, slots=True)
class Truncated:
    """Items inspected one by one, at most `sequential` of them."""

    sequential: int

    def __post_init__(self) -> None:
        if not 1 <= self.sequential <= MOST_ITEMS:
            raise InvalidValue("sequential", f"go to 1 to {MOST_ITEMS} items", self.sequential)


@dataclass(frozen=True, slots=True)
class Line:
    """The line ``slope n + intercept`` of counts over items, in decimals as typed."""

    slope: float
    intercept: float

    def at(self, n: int) -> Fraction:
        """Return the height after `n` items."""
        return typed(self.slope) * n + typed(self.intercept)

    def first(self, height: int) -> int:
        """Return the first number of items at which the line is at least so high."""
        return max(math.ceil((height - typed(self.intercept)) / typed(self.slope)), 1)

    def last(self, height: int) -> int:
        """Return the last number of items at which the line is at most so high."""
        return math.floor((height - typed(self.intercept)) / typed(self.slope))

    def __str__(self) -> str:
        sign = "-" if self.intercept < 0 else "+"
        return f"{write_number(self.slope)}*n{sign}{write_number(abs(self.intercept))}"


@dataclass(frozen=True, slots=True)
class SequentialRule:
    """Accept on or below one line, reject on or above another, and at the end accept up to a count.

    Parameters
    ----------
    accept, reject : Line
    last : int
        The acceptance number when all items allowed have been inspected.
    """

    accept: Line
    reject: Line
    last: int

    def numbers(self, n: int) -> tuple[int, int]:
        """Return the acceptance number after `n` items, `NONE` where there is none, and the reject number."""
        return max(math.floor(self.accept.at(n)), NONE), math.ceil(self.reject.at(n))

    def check(self, most: int) -> None:
        """Refuse lines that leave nothing open, or are too far apart, and an end that contradicts them.

        Raises
        ------
        InvalidValue
        """
        for name, line in (("accept", self.accept), ("reject", self.reject)):
            if not 0 < line.slope < 1:
                raise InvalidValue(name, "have a slope between 0 and 1", str(line))
        if self.accept.intercept >= 0:
            raise InvalidValue(
                "accept", "start below 0: before the first item nothing is accepted", str(self.accept)
            )
        if self.reject.intercept <= 0:
            raise InvalidValue(
                "reject", "start above 0: before the first item nothing is rejected", str(self.reject)
            )
        apart = [self.reject.at(n) - self.accept.at(n) for n in (0, most)]
        if not 1 < min(apart) <= max(apart) <= MOST_OPEN:
            rule = f"be more than 1 and at most {MOST_OPEN} counts apart"
            raise InvalidValue("accept and reject", rule, f"{self.accept} and {self.reject}")
        low, high = self.numbers(most)
        if high > MOST_FOUND:
            raise InvalidValue("reject", f"not pass {MOST_FOUND} before the end", high)
        if not max(low, 0) <= self.last < min(high, most):
            open_ = f"{max(low, 0)} to {min(high, most) - 1}"
            raise InvalidValue("at end", f"accept up to {open_}, which the lines leave open", self.last)

    def looks(self, most: int) -> tuple[Look, ...]:
        """Return the items after which the acceptance number has just risen, or the reject number will.

        The end comes twice: the lines decide first, then the last acceptance number.
        """
        low, high = self.numbers(most)
        turns = {self.accept.first(count) for count in range(low + 1)}
        turns |= {self.reject.last(count) for count in range(1, high)}
        looks = [Look(n, *self.numbers(n)) for n in sorted(turns | {most}) if 1 <= n <= most]
        return (*looks, Look(most, self.last, self.last + 1))

    def steps(self, most: int) -> list[tuple[float, int | None, int]]:
        """Return rows of items, acceptance and reject number, which hold up to the next row; the end last."""
        low, high = self.numbers(most)
        turns = {1} | {self.accept.first(count) for count in range(low + 1)}
        turns |= {self.reject.last(count) + 1 for count in range(1, high)}
        rows = [(n, *self.numbers(n)) for n in sorted(turns) if 1 <= n < most]
        rows.append((most, self.last, self.last + 1))
        return [(float(n), None if accept == NONE else accept, reject) for n, accept, reject in rows]


def wald_lines(claim: float, alpha: float, catch: float, power: float) -> tuple[Line, Line]:
    """Return the accept and the reject line of Wald's sequential probability ratio test.

    Parameters
    ----------
    claim, catch : float
        Defect rates, ``0 < claim < catch < 1``.
    alpha, power : float
        Nominal chances to reject at either: the lines keep them roughly, the plan's own are exact.

    References
    ----------
    A. Wald, Sequential Analysis, 1947, ch. 5 (from memory).

    Examples
    --------
    >>> [str(line)[:9] for line in wald_lines(0.01, 0.05, 0.1, 0.9)]
    ['0.0397474', '0.0397474']
    """
    good = math.log1p(-claim) - math.log1p(-catch)
    ratio = math.log(catch / claim) + good
    slope = good / ratio
    return (
        Line(slope, (math.log1p(-power) - math.log1p(-alpha)) / ratio),
        Line(slope, math.log(power / alpha) / ratio),
    )


def read_most(value: Any, name: str) -> int:
    """Return the number of items in ``to 120``."""
    text = value.lower().removeprefix("to ") if isinstance(value, str) else value
    return read_whole(text, name, 1, MOST_ITEMS)


def read_line(text: str | None, name: str) -> Line:
    """Return the line in ``x<=0.04*n-0.94``.

    Raises
    ------
    InvalidValue
        When the field is missing or has another form.
    """
    sign = "-0.94" if name == "accept" else "+1.21"
    example = f"x{_RELATIONS[name]}0.04*n{sign}"
    if text is None:
        raise InvalidValue(name, f"be written in the plan, e.g. {name} {example}", None)
    compact = text.lower().replace(" ", "").replace("≤", "<=").replace("≥", ">=")
    match = _LINE.fullmatch(compact)
    if match is None or match[1] != _RELATIONS[name]:
        raise InvalidValue(name, f"have the form {example}", text)
    slope, intercept = read_number(match[2], name), read_number(match[4] or 0, name)
    return Line(slope, -intercept if match[3] == "-" else intercept)


def read_end(text: str | None) -> int:
    """Return the last acceptance number in ``accept x<=3``."""
    if text is None:
        raise InvalidValue("at end", "be written in the plan, e.g. at end accept x<=3", None)
    compact = text.lower().replace(" ", "").replace("≤", "<=")
    if not compact.startswith("acceptx<="):
        raise InvalidValue("at end", "have the form accept x<=3", text)
    return read_whole(compact.removeprefix("acceptx<="), "at end")
