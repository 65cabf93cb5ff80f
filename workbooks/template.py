"""An empty request list to fill in: headings, drop-downs, input messages, two examples, a help sheet."""

from __future__ import annotations

from pathlib import Path

from openpyxl.utils import get_column_letter

from steelyard.workbooks.columns import COLUMNS, LONGEST, Cell, Column
from steelyard.workbooks.house import Book, Check, Put

FILLED_ROWS = 60  # rows that look like inputs
CHECKED_ROWS = 2_000  # rows that have drop-downs and input messages

_LIST_WIDTHS = {"characteristic": 26.0, "kind": 16.0, "claim": 12.0, "catch": 12.0}
_HELP_WIDTHS = {"A": 16.0, "B": 9.0, "C": 46.0, "D": 44.0, "E": 20.0}


def write_template(path: Path) -> None:
    """Write an empty request list as an .xlsx workbook.

    Parameters
    ----------
    path : Path
        Replaced if it exists.

    Raises
    ------
    SteelyardError
        When the file can't be written.
    """
    book = Book("Request list", subject="What is to be inspected, and which risks are accepted")
    _list(book)
    _help(book)
    book.save(path)


def _list(book: Book) -> None:
    letters = [get_column_letter(number) for number in range(1, len(COLUMNS) + 1)]
    widths = {letter: _width(column) for letter, column in zip(letters, COLUMNS, strict=True)}
    sheet = book.sheet("Requests", widths)
    sheet.add(*(Put(column.name, "heading") for column in COLUMNS))
    styles = [f"input {column.style}" for column in COLUMNS]
    blank = (None,) * len(COLUMNS)
    examples = list(zip(*(column.examples for column in COLUMNS), strict=True))
    for row in [*examples, *[blank] * (FILLED_ROWS - len(examples))]:
        sheet.add(*(Put(cell, style) for cell, style in zip(row, styles, strict=True)))
    for letter, column in zip(letters, COLUMNS, strict=True):
        sheet.check(f"{letter}2:{letter}{CHECKED_ROWS + 1}", _check(column))
    sheet.freeze("B2")
    sheet.print_setup(landscape=True, repeat="1:1")


def _width(column: Column) -> float:
    if column.name in _LIST_WIDTHS:
        return _LIST_WIDTHS[column.name]
    return 24.0 if column.style == "words" else 10.0


def _check(column: Column) -> Check:
    kind, first, second = "textLength", "0", str(LONGEST)
    if column.choices:
        kind, first, second = "list", f'"{",".join(column.choices)}"', ""
    elif column.limits:
        kind = "whole" if isinstance(column.limits[0], int) else "decimal"
        first, second = map(repr, column.limits)
    name = column.name.capitalize()
    message = f"{name} must be {column.allowed}."
    prompt = f"{column.help} {'Needed.' if column.required else 'May stay empty.'}"
    return Check(kind, first, second, message, title=name, prompt=prompt, blank=True)


def _help(book: Book) -> None:
    sheet = book.sheet("Help", _HELP_WIDTHS)
    sheet.add(Put("How to fill in the request list", "title"))
    sheet.add(
        Put(
            "Every row of the sheet Requests asks for one plan. Type over the two example rows, add as many "
            "rows as you need, and leave a cell empty where a column says nothing for you. Columns may stand "
            "in any order, and those that are not needed may be deleted.",
            "text",
            span=5,
        )
    )
    sheet.skip()
    top = sheet.add(
        *(Put(text, "heading") for text in ("Column", "Needed", "What it says", "Allowed", "Example"))
    )
    for column in COLUMNS:
        sheet.add(
            Put(column.name, "label"),
            Put("yes" if column.required else "", "text"),
            Put(column.help, "text"),
            Put(column.allowed, "text"),
            Put(_shown(column.examples[0], column), "text"),
        )
    sheet.freeze(f"A{top + 1}")
    sheet.print_setup(landscape=True, repeat=f"{top}:{top}")


def _shown(example: Cell | None, column: Column) -> Cell | None:
    """Return an example as the cell of the list shows it."""
    return f"{example:.0%}" if column.style == "rate" and isinstance(example, float) else example
