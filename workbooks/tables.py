"""Tables that a user fills in: rows of cells read into values, each problem told by row and column."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from pathlib import Path
from typing import Any

from openpyxl.utils import get_column_letter

from steelyard.core.errors import InvalidValue, SteelyardError, shown
from steelyard.workbooks.columns import Cell, Column
from steelyard.workbooks.tabular import Raw, Row, Rows, Unusable


@dataclass(frozen=True, slots=True)
class Problem:
    """A cell that can't be used; its row is left out.

    Examples
    --------
    >>> print(Problem(7, "alpha", 5.0, "a probability between 0 and 1", "type 5% or 0.05"))
    row 7: alpha must be a probability between 0 and 1, but got 5 (type 5% or 0.05)
    """

    row: int
    column: str
    value: Any
    allowed: str
    hint: str = ""

    def __str__(self) -> str:
        tail = f" ({self.hint})" if self.hint else ""
        return f"row {self.row}: {self.column} must be {self.allowed}, but got {shown(self.value)}{tail}"


def read_table(
    path: Path, rows: Rows, wanted: Sequence[Column]
) -> tuple[list[tuple[int, dict[str, Any]]], list[Problem]]:
    """Return the good rows of a table, and what is wrong with the others.

    Parameters
    ----------
    path : Path
        Where the rows come from, for messages.
    rows : Rows
        Headings first.
    wanted : sequence of Column
        What the headings may be.

    Returns
    -------
    tuple of (list of (int, dict), list of Problem)
        Number and values of each good row; problems of the others.

    Raises
    ------
    SteelyardError
        When there are no rows, for wrong headings, and for mixed decimal marks.
    """
    if not rows.found:
        message = f"{path.name} must hold a row of headings ({_headings(wanted)}), but is empty"
        raise SteelyardError(message)
    (_, headings), *body = rows.found
    columns = _match(path, headings, wanted)
    if rows.comma_allowed:
        body = _decimal_points(path, columns, body)
    good: list[tuple[int, dict[str, Any]]] = []
    problems: list[Problem] = []
    for row in body:
        values, wrong = _read_row(columns, row)
        problems += wrong
        if not wrong:
            good.append((row[0], values))
    return good, problems


def _headings(wanted: Sequence[Column]) -> str:
    return ", ".join(column.name for column in wanted)


def _plain(heading: Raw) -> str:
    text = heading.shown if isinstance(heading, Unusable) else str(heading)
    return " ".join(re.sub(r"[_\-*:]", " ", text).lower().split())


def _match(path: Path, headings: Sequence[Raw], wanted: Sequence[Column]) -> list[Column | None]:
    """Return the column of each heading; all that is wrong with the headings is told at once."""
    known = {column.name: column for column in wanted}
    names = [None if heading is None else _plain(heading) for heading in headings]
    wrong = []
    for name in filter(None, names):
        if name not in known:
            close = get_close_matches(name, known, n=1)
            wrong.append(f"unknown heading {name}" + (f" (did you mean {close[0]}?)" if close else ""))
    wrong += [f"heading {name} twice" for name, count in Counter(filter(None, names)).items() if count > 1]
    wrong += [
        f"no heading {column.name}" for column in wanted if column.required and column.name not in names
    ]
    if wrong:
        message = f"{path.name}: {'; '.join(wrong)}. The headings are: {_headings(wanted)}"
        raise SteelyardError(message)
    return [known[name] if name else None for name in names]


def _decimal_points(path: Path, columns: Sequence[Column | None], rows: Sequence[Row]) -> list[Row]:
    """Turn decimal commas into points, unless the file uses both."""
    seen: dict[str, str] = {}
    for number, cells in rows:
        for column, cell in zip(columns, cells, strict=False):
            if column is not None and column.numeric and isinstance(cell, str):
                for mark in re.findall(r"(?<=\d)[.,](?=\d)", cell):
                    seen.setdefault(mark, f"{cell} in row {number}, {column.name}")
    if len(seen) > 1:
        message = f"{path.name} must keep to one decimal mark, but has {' and '.join(seen.values())}"
        raise SteelyardError(message)
    if "," not in seen:
        return list(rows)
    return [
        (number, [_point(column, cell) for column, cell in _pairs(columns, cells)]) for number, cells in rows
    ]


def _point(column: Column | None, cell: Raw) -> Raw:
    if column is None or not column.numeric or not isinstance(cell, str):
        return cell
    return re.sub(r"(?<=\d),(?=\d)", ".", cell)


def _pairs(columns: Sequence[Column | None], cells: Sequence[Raw]) -> list[tuple[Column | None, Raw]]:
    """Return the cells with their columns; short rows are filled, cells without a heading have no column."""
    width = max(len(columns), len(cells))
    wide = [*columns, *[None] * (width - len(columns))]
    return list(zip(wide, [*cells, *[None] * (width - len(cells))], strict=True))


def _read_row(columns: Sequence[Column | None], row: Row) -> tuple[dict[str, Any], list[Problem]]:
    number, cells = row
    values: dict[str, Any] = {}
    problems = []
    for place, (column, cell) in enumerate(_pairs(columns, cells), 1):
        if column is None:
            if cell is not None:
                name = f"column {get_column_letter(place)}"
                problems.append(Problem(number, name, cell, "empty, as it has no heading"))
            continue
        try:
            values[column.field] = _value(column, cell)
        except InvalidValue as error:
            problems.append(Problem(number, column.name, error.value, column.allowed, error.hint))
    return values, problems


def _value(column: Column, cell: Raw) -> Cell | None:
    if isinstance(cell, Unusable):
        raise InvalidValue(column.name, f"be {column.allowed}", cell.shown)
    if cell is not None:
        return column.read(cell, column.name)
    if column.required:
        raise InvalidValue(column.name, f"be {column.allowed}", None)
    return None
