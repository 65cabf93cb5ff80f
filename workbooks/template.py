"""An empty request list to fill in: headings, drop-downs, input messages, two examples, a help sheet."""

from __future__ import annotations

from pathlib import Path

from openpyxl.utils import get_column_letter

from steelyard.core.numbers import read_number
from steelyard.workbooks.classes import CLASS_COLUMNS, SHEET
from steelyard.workbooks.columns import COLUMNS, LONGEST, Column
from steelyard.workbooks.house import Book, Check, Put

FILLED_ROWS = 40  # rows that look like inputs
FILLED_CLASSES = 12
CHECKED_ROWS = 2_000  # rows that have drop-downs and input messages

_LIST_WIDTHS = {"characteristic": 24.0, "kind": 15.0, "reference": 22.0, "note": 24.0, "unit": 18.0}
_CLASS_WIDTHS = (20.0, 40.0, 10.5, 14.0, 10.5)
_HELP_WIDTHS = {"A": 16.0, "B": 9.0, "C": 54.0, "D": 46.0, "E": 22.0}


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
    _classes(book)
    _help(book)
    book.save(path)


def _list(book: Book) -> None:
    letters = [get_column_letter(number) for number in range(1, len(COLUMNS) + 1)]
    widths = {
        letter: _LIST_WIDTHS.get(column.name, 10.5) for letter, column in zip(letters, COLUMNS, strict=True)
    }
    sheet = book.sheet("Requests", widths)
    sheet.add(*(Put(column.name, "heading") for column in COLUMNS))
    for number in range(FILLED_ROWS):
        sheet.add(*(_input(column, number) for column in COLUMNS))
    for letter, column in zip(letters, COLUMNS, strict=True):
        sheet.check(f"{letter}2:{letter}{CHECKED_ROWS + 1}", _check(column))
    sheet.freeze("B2")
    sheet.print_setup(landscape=True, repeat="1:1")


def _classes(book: Book) -> None:
    letters = [get_column_letter(number) for number in range(1, len(CLASS_COLUMNS) + 1)]
    sheet = book.sheet(SHEET, dict(zip(letters, _CLASS_WIDTHS, strict=True)))
    sheet.add(*(Put(column.name, "heading") for column in CLASS_COLUMNS))
    for number in range(FILLED_CLASSES):
        sheet.add(*(_input(column, number) for column in CLASS_COLUMNS))
    for letter, column in zip(letters, CLASS_COLUMNS, strict=True):
        sheet.check(f"{letter}2:{letter}{FILLED_CLASSES + 1}", _check(column))
    sheet.freeze("B2")
    sheet.print_setup(repeat="1:1")


def _input(column: Column, number: int) -> Put:
    """Return a cell to fill in; the first rows hold the examples, percent as a spreadsheet stores it."""
    example = column.examples[number] if number < len(column.examples) else None
    if isinstance(example, str) and example.endswith("%"):
        return Put(read_number(example, column.name), "input rate")
    return Put(example, f"input {column.style}")


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
            "in any order, and those that are not needed may be deleted. The sheet Risk classes holds your "
            "own classes: a row that names one takes its alpha, catch and power where it leaves them empty.",
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
            Put(column.name, "cell"),
            Put("yes" if column.required else "", "cell"),
            Put(column.help, "cell"),
            Put(column.allowed, "cell"),
            Put(column.examples[0], "cell"),
        )
    sheet.freeze(f"A{top + 1}")
    sheet.print_setup(landscape=True, one_page=True)
