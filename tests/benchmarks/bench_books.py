"""A plan book, against openpyxl alone writing the same cells with the same styles, but no charts."""

from copy import copy
from dataclasses import replace

from openpyxl import Workbook, load_workbook
from openpyxl.styles import NamedStyle
from ratio import ratio, scratch

from steelyard.workbooks.book import build_book
from steelyard.workbooks.plans import plan_requests
from steelyard.workbooks.requests import Request

EXAMPLES = (
    Request(0, "Blocked emitter", "binomial", "2%", 0.05, "8%", 0.9),
    Request(0, "Leak at 1 bar", "binomial", "0.25%", 0.05, "10%", 0.9, n=20),
    Request(
        0, "Clogs in the sand test", "binomial", "5%", 0.05, "0.08%", 0.95, "below", n=59, verdict="pass"
    ),
    Request(0, "Print defects", "poisson", "0.05", 0.05, "0.12", 0.9),
    Request(0, "Wall below 0.9 mm", "hypergeometric", "1%", 0.05, "5%", 0.9, lot=600),
)
PARTS = ("font", "fill", "border", "alignment", "number_format", "protection")


def requests(count):
    """Return a request list without two equal rows."""
    named = [EXAMPLES[row % len(EXAMPLES)] for row in range(count)]
    return [
        replace(one, row=row + 2, characteristic=f"{one.characteristic} {row}", alpha=0.05 - 1e-6 * row)
        for row, one in enumerate(named)
    ]


def content(path):
    """Return a workbook's styles, and its cells as (row, column, value, style) by sheet."""
    book = load_workbook(path)
    sheets = {
        sheet.title: [
            (cell.row, cell.column, cell.value, cell.style)
            for row in sheet.iter_rows()
            for cell in row
            if cell.value is not None or cell.has_style
        ]
        for sheet in book
    }
    used = {name: book._named_styles[name] for name in book.named_styles if name != "Normal"}
    return {
        name: {part: copy(getattr(style, part)) for part in PARTS} for name, style in used.items()
    }, sheets


@ratio("plan book / openpyxl writing its cells", limit=2.0, sizes=(50, 500))
def plan_book(count):
    folder = scratch()
    path, asked = folder / "book.xlsx", requests(count)

    def ours():
        planned, _ = plan_requests(asked)
        return build_book(planned, path, justify=[])

    ours()
    styles, sheets = content(path)

    def reference():
        workbook = Workbook()
        for name, parts in styles.items():
            workbook.add_named_style(NamedStyle(name=name, **parts))
        for title, cells in sheets.items():
            sheet = workbook.create_sheet(title)
            for row, column, value, style in cells:
                sheet.cell(row, column, value).style = style
        workbook.save(folder / "reference.xlsx")

    return ours, reference
