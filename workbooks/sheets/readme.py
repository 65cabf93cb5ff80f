"""The *Read me*: how to use the book, what the colours mean, which versions computed it."""

from __future__ import annotations

from collections.abc import Sequence

from steelyard.core import VERSION
from steelyard.workbooks.house import Book, Live, Put, Sheet
from steelyard.workbooks.requests import Problem
from steelyard.workbooks.sheets.justification import Source

TITLE = "Read me"

SHEETS = (
    ("Register", "A row for each characteristic: request, plan, risks, checks. Start here."),
    ("Power grid", "Power of every plan over a range of true values, with charts."),
    ("Checks", "Every plan by the add-in and by the spreadsheet's own functions."),
    ("Comparison", "Up to six plans side by side: items, risks, curves, where they cross."),
    ("Sample size", "Size and power against the number of items, for one requirement."),
    ("Results log", "A row for each inspected lot: decision, p-value, limits, running totals."),
    ("Risk classes", "The table from which rows took alpha, catch and power."),
)
STEPS = (
    "Edit the yellow cells of the Register; plan, risks and curves follow when Steelyard's add-in is loaded.",
    "Read the remark on each plan, and where a size was fixed the shortfall: how much power is missing.",
    "Print the justifications, fill in what they leave open, have them signed before any sample is taken.",
    "Without the add-in the numbers stay until the program recalculates; green formulas are its own.",
    "To add characteristics, or to change their kind, extend the request list and build the book anew.",
)
CAUTIONS = (
    "A sample proves no lot free of defects, and not rejecting a claim does not prove it.",
    "Where a failure can hurt someone, codes, contracts and a qualified person decide.",
)
LEGEND = (
    ("input", "An input: may be edited."),
    ("result", "Computed by Steelyard's functions."),
    ("native", "Computed by the spreadsheet's own functions."),
    ("warning", "Needs attention."),
    ("writing", "To be filled in."),
)


def add_readme(book: Book) -> Sheet:
    """Add the sheet, still empty, so that it comes first."""
    return book.sheet(TITLE, {"A": 3.0, "B": 30.0, "C": 76.0})


def fill_readme(
    sheet: Sheet, summary: str, source: Source, justified: Sequence[str], problems: Sequence[Problem]
) -> None:
    """Write the sheet when the others are there."""
    sheet.add(Put(sheet.book.title, "title"))
    sheet.add(Put(summary, "subtitle"))
    _connection(sheet)
    _section(sheet, "How to use this book")
    for number, step in enumerate(STEPS, 1):
        sheet.add(Put(number, "unit"), Put(step, "text", 2))
    _section(sheet, "Colours")
    for style, text in LEGEND:
        sheet.add(None, Put("1.234" if style != "writing" else None, style), Put(text, "text"))
    if problems:
        _section(sheet, "Rows of the request list that were not built")
        for problem in problems:
            sheet.add(None, Put(str(problem), "warning", 2))
    _section(sheet, "Cautions")
    for text in CAUTIONS:
        sheet.add(None, Put(text, "text", 2))
    _section(sheet, "Origin")
    sheet.add(None, Put("Request list", "label"), Put(source.name, "text"))
    sheet.add(None, Put("SHA-256 of the list", "label"), Put(source.digest, "text"))
    _section(sheet, "Sheets")
    present = sheet.book.workbook.sheetnames
    for title, text in (entry for entry in SHEETS if entry[0] in present):
        sheet.add(None, Put(title, "link", link=f"'{title}'!A1"), Put(text, "text"))
    for title in justified:
        quoted = title.replace("'", "''")
        sheet.add(None, Put(title, "link", link=f"'{quoted}'!A1"), Put("Justification to be signed.", "text"))
    sheet.protect()
    sheet.print_setup(area=f"A1:C{sheet.next_row - 1}")


def _section(sheet: Sheet, text: str) -> None:
    sheet.skip()
    sheet.add(Put(text, "section"))


def _connection(sheet: Sheet) -> None:
    _section(sheet, "Versions and connection")
    built = sheet.add(None, Put("Built with Steelyard", "label"), Put(VERSION, "text"))
    live = sheet.add(
        None,
        Put("Numbers computed by", "label"),
        Live('=IFERROR(SY_VERSION(),"not connected: load the add-in")', VERSION, "text"),
    )
    sheet.add(
        None,
        Put("Connection", "label"),
        Live(
            f'=IF(C{live}&""=C{built},"The add-in is of the version that built this book.",'
            f'IF(ISERROR(FIND("not",C{live})),"The add-in is of another version than the book: '
            f'newer functions may be missing.","The numbers shown need the add-in to follow your edits."))',
            "The add-in is of the version that built this book.",
            "text",
        ),
    )
