"""The demo list and its book, built once, and the cells of its sheets by their headings."""

import functools
from importlib.resources import files
from pathlib import Path

from openpyxl import load_workbook

from steelyard.workbooks.book import build_book
from steelyard.workbooks.plans import plan_requests
from steelyard.workbooks.requests import read_requests

DATA = Path(str(files("steelyard.workbooks") / "data"))
LIST = DATA / "demo_requests.csv"
SHOWN = [
    "Blocked emitter",
    "Burst at 4 bar",
    "Clogs in the sand test",
    "Left-hand barb share",
    "Marker lines",
]
SHOWN += ["Wall below 0.9 mm", "Left-hand coils in the lot"]


@functools.cache
def demo():
    """Return the planned characteristics of the demo list."""
    requests, problems = read_requests(LIST)
    planned, refused = plan_requests(requests)
    assert not problems
    assert not refused
    return tuple(planned)


def build(path, host="excel", justify=SHOWN, **options):
    """Write the demo's plan book and return its path."""
    build_book(demo(), path, host=host, source=LIST, justify=justify, **options)
    return path


class Stored:
    """The values that a saved book shows to a reader that does not calculate."""

    def __init__(self, path):
        self.values = load_workbook(path, data_only=True)
        self.formulas = load_workbook(path)

    def register(self, characteristic, heading):
        """Return a cell of the Register by its row's characteristic and its column's heading."""
        sheet = self.values["Register"]
        row = next(cell.row for cell in sheet["B"] if cell.value == characteristic)
        column = next(cell.column for cell in sheet[6] if cell.value == heading)
        return sheet.cell(row, column).value

    def texts(self):
        """Yield every formula with its sheet, cell and stored value."""
        for sheet in self.formulas:
            for row in sheet.iter_rows():
                for cell in row:
                    if cell.data_type == "f":
                        text = getattr(cell.value, "text", cell.value)
                        yield (
                            sheet.title,
                            cell.coordinate,
                            text,
                            self.values[sheet.title][cell.coordinate].value,
                        )
