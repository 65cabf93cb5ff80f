"""Calls of every cell function as Excel makes them, and what must come back; used on two systems."""

from __future__ import annotations

import re
from collections.abc import Iterator
from typing import Any

from steelyard.addin import CATALOGUE, call
from steelyard.addin.catalogue import Cells, Entry

MISSING = {"missing": True}
NOT_AVAILABLE = {"error": -2146826246}  # how #N/A travels; the number of Excel's object model is 2042
PLANS = (
    "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4",
    "binomial | n 80 | claim p<=0.02 | alpha 0.05 | reject x>=5",
)
RATE = 0.05
REFERENCE = re.compile(r"([A-Z])(\d+)(?::([A-Z])(\d+))?")
PART = re.compile(r'((?:"[^"]*"|\([^()]*\)|[^,])*),')
NUMBER = re.compile(r"\d+(?:\.\d+)?(?:e-?\d+)?")
CALL = re.compile(r"(SY_[A-Z_]+)\((.*)\)")


def plain_arguments(entry: Entry) -> list[Any]:
    """Return the arguments of an entry's example formula, its cells filled with plans."""
    return _arguments(entry.example.removesuffix(")").partition("(")[2])


def _arguments(inside: str) -> list[Any]:
    return [_value(part.strip()) for part in PART.findall(f"{inside},")] if inside else []


def _value(part: str) -> Any:
    if nested := CALL.fullmatch(part):
        return call(nested[1], _arguments(nested[2]))
    if not part:
        return None
    if part.startswith('"'):
        return part.strip('"')
    if reference := REFERENCE.fullmatch(part):
        return _range(*reference.groups())
    return float(part.removesuffix("%")) / 100 if part.endswith("%") else float(part)


def _range(left: str, top: str, right: str | None, bottom: str | None) -> Any:
    """Return the cells of a reference: plans stand in column A, one row of two, and rates in the others."""
    if right is None or bottom is None:
        return PLANS[int(top) % 2] if left == "A" else RATE
    columns = range(ord(right) - ord(left) + 1)
    return [
        [None if row % 2 else PLANS[row // 2 % 2] if left == "A" else RATE for _ in columns]
        for row in range(int(bottom) - int(top) + 1)
    ]


def calls() -> Iterator[tuple[str, list[Any]]]:
    """Yield the name and the arguments of each call."""
    for entry in CATALOGUE.values():
        plain = plain_arguments(entry)
        blanks = len(entry.arguments) - len(plain)
        yield entry.name, [*plain, *[MISSING] * blanks]
        for place, value in enumerate(plain):
            before, after = plain[:place], [*plain[place + 1 :], *[None] * blanks]
            yield entry.name, [*before, None, *after]
            yield entry.name, [*before, NOT_AVAILABLE, *after]
            if not isinstance(value, list):
                yield entry.name, [*before, [[value], [None], [value]], *after]
                yield entry.name, [*before, [[value, "nonsense"]], *after]


def expected(name: str, arguments: list[Any]) -> Cells:
    """Return what Excel must get: the catalogue's own answer, without None and without a frame of one row."""
    given = [None if value == MISSING else "#N/A" if value == NOT_AVAILABLE else value for value in arguments]
    answer = call(name, given)
    rows = answer if isinstance(answer, list) else [[answer]]
    shown = [["" if value is None else value for value in row] for row in rows]
    if len(shown) > 1:
        return shown
    return shown[0][0] if len(shown[0]) == 1 else shown[0]


def differs(found: Any, wanted: Any) -> bool:
    """Tell whether two answers differ by more than the last digits of another build of scipy."""
    if isinstance(wanted, list):
        return len(found) != len(wanted) or any(map(differs, found, wanted))
    if isinstance(wanted, str):
        return found != wanted and (not isinstance(found, str) or _texts_differ(found, wanted))
    return not abs(found - wanted) <= 1e-9 * abs(wanted)


def _texts_differ(found: str, wanted: str) -> bool:
    """Compare plan texts: their words to the letter, their numbers as numbers."""
    if NUMBER.split(found) != NUMBER.split(wanted):
        return True
    pairs = zip(NUMBER.findall(found), NUMBER.findall(wanted), strict=True)
    return any(differs(float(one), float(other)) for one, other in pairs)
