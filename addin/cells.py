"""From cells to values and back: blanks, error values, refusals, ranges that broadcast.

Rules: an error value in any argument is handed on; so is a refusal of another function; a blank optional
argument takes its default, a blank required one is refused; a blank cell inside a range gives an empty
cell; one bad cell never spoils the others; no exception ever leaves this module.
"""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterator, Sequence
from typing import Any

import numpy as np

from steelyard.addin.catalogue import Argument, Cells, add, arguments_of
from steelyard.core.errors import InvalidValue, SteelyardError

LONGEST = 255
MOST_CELLS = 2_000_000
MOST_AT_ONCE = 10_000  # cells of a range that one answer takes as a whole
ERRORS = frozenset(
    ["#N/A", "#VALUE!", "#REF!", "#DIV/0!", "#NUM!", "#NAME?", "#NULL!", "#SPILL!", "#CALC!", "#GETTING_DATA"]
)
REFUSED = "SY: "
FAULT = "an internal fault"
_CACHED = 65_536


def refusal(error: SteelyardError | str) -> str:
    """Return an error as the short text that a cell shows."""
    text = f"{REFUSED}{error}".replace("\n", " ")
    return text if len(text) < LONGEST else text[: LONGEST - 2] + "…"


def is_blank(value: Any) -> bool:
    """Tell whether a cell is empty, or shows only spaces."""
    return value is None or (isinstance(value, str) and not value.strip())


def handed_on(value: Any) -> bool:
    """Tell whether a cell holds an error value or a refusal, which are passed on unchanged."""
    return isinstance(value, str) and (value.startswith(REFUSED) or value in ERRORS)


def cell(
    *, group: str, help: str, example: str, grid: Callable[..., Any] | None = None
) -> Callable[[Callable[..., Any]], Callable[..., Cells]]:
    """Make a typed function a cell function and enter it into the catalogue.

    Parameters
    ----------
    group : {"make", "ask", "explain"}
        Where help lists it.
    help, example : str
        Wizard text and an example formula.
    grid : callable, optional
        A vectorised twin: takes the arguments as rows of cells and returns an array of floats, NaN where
        the scalar function must answer (refusals, texts).
    """

    def decorate(function: Callable[..., Any]) -> Callable[..., Cells]:
        arguments = arguments_of(function)
        one = _scalar(function, arguments)
        remembered = functools.lru_cache(_CACHED, typed=True)(one)

        @functools.wraps(function)
        def answer(*cells: Cells) -> Cells:
            try:
                return remembered(*cells)
            except TypeError:  # a range is no key of a cache
                return _over_ranges(one, arguments, cells, grid)

        answer.__annotations__ = {}
        add(function, answer, group, help, example)
        return answer

    return decorate


def _scalar(function: Callable[..., Any], arguments: Sequence[Argument]) -> Callable[..., Cells]:
    def one(*cells: Any) -> Cells:
        for value in _single(cells):
            if handed_on(value):
                return value
        try:
            return function(*_read(arguments, cells))
        except SteelyardError as error:
            return refusal(error)
        except (RecursionError, MemoryError, ArithmeticError):
            return refusal("the question is too large to compute")
        except Exception as error:  # noqa: BLE001 - a cell must never show a traceback
            return refusal(f"{FAULT} ({type(error).__name__}): please report the formula")

    return one


def _single(cells: Sequence[Any]) -> Iterator[Any]:
    """Yield every cell, also those of ranges that are taken as a whole."""
    for value in cells:
        if isinstance(value, tuple):
            yield from (cell for row in value for cell in row)
        else:
            yield value


def _read(arguments: Sequence[Argument], cells: Sequence[Any]) -> list[Any]:
    values = []
    for argument, value in zip(arguments, _filled(arguments, cells), strict=True):
        if not is_blank(value):
            values.append(argument.word.read(value, argument.name))
        elif argument.required:
            raise InvalidValue(argument.name, "be given", None)
        else:
            values.append(argument.default)
    return values


def _filled(arguments: Sequence[Argument], cells: Sequence[Any]) -> list[Any]:
    """Return as many cells as there are arguments; blank ones for those left out."""
    if len(cells) > len(arguments):
        names = ", ".join(argument.name for argument in arguments) or "nothing"
        raise InvalidValue("arguments", f"be at most {len(arguments)} ({names})", len(cells))
    return [*cells, *[None] * (len(arguments) - len(cells))]


def _over_ranges(
    one: Callable[..., Cells],
    arguments: Sequence[Argument],
    cells: Sequence[Cells],
    grid: Callable[..., Any] | None,
) -> Cells:
    """Answer cell by cell where an argument is a range; ranges broadcast like rows against columns."""
    try:
        given = list(map(_range, _filled(arguments, cells), arguments))
        rows, columns = _shape(arguments, given)
    except SteelyardError as error:
        return refusal(error)
    if not any(isinstance(value, list) for value in given):
        return one(*given)
    answers = np.full((rows, columns), np.nan) if grid is None else grid(*given)
    table: list[list[Cells]] = answers.tolist()
    for row, column in np.argwhere(np.isnan(answers)).tolist():
        table[row][column] = _one_cell(one, arguments, given, row, column)
    return table


def _one_cell(
    one: Callable[..., Cells],
    arguments: Sequence[Argument],
    given: Sequence[Any],
    row: int,
    column: int,
) -> Cells:
    picked = [_at(value, row, column) if isinstance(value, list) else value for value in given]
    for argument, value, whole in zip(arguments, picked, given, strict=True):
        if isinstance(whole, list) and argument.required and is_blank(value):
            return None
    answer = one(*picked)
    if isinstance(answer, list):
        return refusal("this function answers with several cells: ask it one plan at a time")
    return answer


def _at(rows: list[list[Any]], row: int, column: int) -> Any:
    line = rows[row if len(rows) > 1 else 0]
    return line[column if len(line) > 1 else 0]


def _range(value: Cells, argument: Argument) -> Any:
    """Return a range as rows, a range of one cell as its value, a range taken as a whole as tuples."""
    if not isinstance(value, list | tuple):
        return value
    rows = [list(row) if isinstance(row, list | tuple) else [row] for row in value]
    if value and not isinstance(value[0], list | tuple):
        rows = [list(value)]
    if argument.word.whole:
        if (count := sum(map(len, rows))) > MOST_AT_ONCE:
            raise InvalidValue(argument.name, f"be a range of at most {MOST_AT_ONCE} cells", count)
        return tuple(map(tuple, rows))
    if not rows or not rows[0] or any(len(row) != len(rows[0]) for row in rows):
        raise InvalidValue("a range", "have rows of one length", f"{len(rows)} uneven rows")
    return rows[0][0] if len(rows) == len(rows[0]) == 1 else rows


def _shape(arguments: Sequence[Argument], given: Sequence[Any]) -> tuple[int, int]:
    ranges = [value for value in given if isinstance(value, list)]
    if not ranges:
        return 1, 1
    rows, columns = max(map(len, ranges)), max(len(value[0]) for value in ranges)
    for argument, value in zip(arguments, given, strict=True):
        if isinstance(value, list) and (len(value) not in (1, rows) or len(value[0]) not in (1, columns)):
            shape = f"{len(value)} by {len(value[0])} cells"
            raise InvalidValue(argument.name, f"fit the other ranges ({rows} by {columns} cells)", shape)
    if rows * columns > MOST_CELLS:
        raise InvalidValue("a range", f"give at most {MOST_CELLS} cells", rows * columns)
    return rows, columns
