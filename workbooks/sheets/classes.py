"""The *Risk classes*: the table from which rows of the request list took alpha, catch and power."""

from __future__ import annotations

import hashlib

from steelyard.workbooks.classes import CLASS_COLUMNS, SHEET, RiskClass, RiskTable
from steelyard.workbooks.house import Book, Put, Sheet

_WIDTHS = {"A": 20.0, "B": 48.0, "C": 12.0, "D": 16.0, "E": 12.0}
_NOTES = (
    "As it stood when the book was built; a number typed in a row of the list wins over its class.",
    "To change a class, change the table of the request list and build the book anew.",
)


def add_classes(book: Book, table: RiskTable | None) -> Sheet | None:
    """Add the sheet, or nothing where there is no table; return it."""
    if table is None:
        return None
    sheet = book.sheet(SHEET, _WIDTHS)
    sheet.add(Put("Risk classes", "title"))
    sheet.add(Put("Which risks are accepted, by what a failure does.", "subtitle"))
    for text in _NOTES:
        sheet.add(Put(text, "note", 5))
    sheet.skip()
    sheet.add(*(Put(column.name.capitalize(), "heading") for column in CLASS_COLUMNS))
    sheet.rows(_row(one) for one in table.classes.values())
    sheet.skip()
    digest = hashlib.sha256(table.path.read_bytes()).hexdigest()
    sheet.add(Put("File of the table", "label"), Put(table.path.name, "text", 4))
    sheet.add(Put("SHA-256 of the file", "label"), Put(digest, "text", 4))
    sheet.protect()
    sheet.print_setup(area=f"A1:E{sheet.next_row - 1}")
    return sheet


def _row(one: RiskClass) -> list[Put]:
    return [
        Put(one.risk_class, "cell"),
        Put(one.severity, "cell"),
        Put(one.alpha, "result rate"),
        Put(one.catch, "index"),
        Put(one.power, "result rate"),
    ]
