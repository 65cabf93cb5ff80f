"""The house style of workbooks: what a sheet builder imports.

A sheet is rows of pieces (`Put`, `Live`, `LiveArray`), laid out by `Sheet`, collected by `Book`. The values
of formulas are computed by our own core before the file is written, so every reader sees them::

    book = Book("Oxbow Drip plan book")
    sheet = book.sheet("Plan")
    row = sheet.add(Put("Claim", "label"), Put(0.02, "input rate", check=between(0, 1)))
    sheet.add(Put("Plan", "label"), Live(f"=SY_BINOMIAL(50,B{row})", "binomial | n 50 | …"))
    sheet.add(Put("Power", "label"), LiveArray(f"=SY_POWER(B{row + 1},D1:F1)", [[0.1, 0.5, 0.9]]))
    book.save(path)
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from openpyxl import Workbook
from openpyxl.styles import Font
from openpyxl.utils import range_to_tuple
from openpyxl.workbook.defined_name import DefinedName

from steelyard.core.errors import InvalidValue
from steelyard.workbooks import parts, styles
from steelyard.workbooks.charts import Axis, Curve, curve_chart, fill_caches
from steelyard.workbooks.checks import Check, between, choice
from steelyard.workbooks.formulas import Host, check_name
from steelyard.workbooks.pieces import Live, LiveArray, Piece, Put, Value
from steelyard.workbooks.sheet import Sheet

__all__ = [
    "Axis",
    "Book",
    "Check",
    "Curve",
    "Host",
    "Live",
    "LiveArray",
    "Piece",
    "Put",
    "Sheet",
    "Value",
    "between",
    "choice",
    "curve_chart",
]


class Book:
    """A workbook in the house style.

    Parameters
    ----------
    title : str
        Title of the document, printed in the header of every page.
    host : {"excel", "calc"}
        Decides how our functions are spelled.
    subject, description, keywords : str
        Document properties.
    imprint : str
        Program and version, printed in the footer.
    """

    def __init__(
        self,
        title: str,
        host: Host = "excel",
        *,
        subject: str = "",
        description: str = "",
        keywords: str = "",
        imprint: str = "Steelyard",
    ) -> None:
        self.title, self.host, self.imprint = title, host, imprint
        self.workbook = Workbook()
        self.workbook.remove(self.workbook.active)
        normal = Font(name=styles.FONT, size=styles.SIZE, family=2)
        self.workbook._fonts[0] = self.workbook._named_styles["Normal"].font = normal
        properties = self.workbook.properties
        properties.title, properties.subject, properties.description = title, subject, description
        properties.keywords, properties.creator, properties.lastModifiedBy = keywords, imprint, imprint
        self.sheets: dict[str, Sheet] = {}
        self._style_arrays: dict[str, Any] = {}

    def sheet(self, title: str, widths: Mapping[str, float] | None = None) -> Sheet:
        """Add a worksheet.

        Parameters
        ----------
        title : str
            See `free_title` for one made from any text.
        widths : mapping, optional
            Column letters -> widths; the other columns are fitted to what they hold.
        """
        self.sheets[title] = sheet = Sheet(self, title, widths or {})
        return sheet

    def free_title(self, wanted: str) -> str:
        """Return a sheet title made from any text: allowed characters, at most 31, not yet taken.

        Examples
        --------
        >>> Book("Example").free_title("Leak at 1 bar / cold [wet]")
        'Leak at 1 bar - cold (wet)'
        """
        clean = wanted.translate(str.maketrans("[]:*?/\\", "()-x.--"))[:31].strip("' ") or "Sheet"
        taken = {title.lower() for title in self.sheets} | {"history"}
        title, number = clean, 2
        while title.lower() in taken:
            tail = f" ({number})"
            title, number = clean[: 31 - len(tail)] + tail, number + 1
        return title

    def name(self, name: str, ref: str) -> None:
        """Define a name for a cell or range of `Sheet.ref`.

        Raises
        ------
        InvalidValue
            When the name could be read as a cell, holds other characters, or is taken.
        """
        check_name(name)
        if name.lower() in {taken.lower() for taken in self.workbook.defined_names}:
            raise InvalidValue("name", "not be taken already", name)
        self.workbook.defined_names[name] = DefinedName(name, attr_text=ref)

    def values(self, ref: str) -> list[Value]:
        """Return the values that a reference of `Sheet.ref` shows, row by row."""
        whole = ref if ":" in ref else f"{ref}:{ref.rpartition('!')[2]}"
        title, (left, top, right, bottom) = range_to_tuple(whole)
        sheet = self.sheets[title.replace("''", "'")]
        cells = [cell for row in sheet.raw.iter_rows(top, bottom, left, right) for cell in row]
        return [sheet.stored.get(cell.coordinate, cell.value) for cell in cells]

    def style_array(self, words: str) -> Any:
        """Return openpyxl's numbers for a style, registered once: naming it for every cell is slow."""
        if words not in self._style_arrays:
            style = styles.named_style(words)
            self.workbook.add_named_style(style)
            self._style_arrays[words] = style.as_tuple()
        return self._style_arrays[words]

    def save(self, path: Path, *, recalculate: bool = False) -> None:
        """Write the workbook, with values beside formulas and points in charts; see `parts.save`."""
        for sheet in self.sheets.values():
            sheet.finish()
            for chart in sheet.raw._charts:
                fill_caches(chart, self.values)
        stored = {title: sheet.stored for title, sheet in self.sheets.items()}
        descriptions = {title: sheet.descriptions for title, sheet in self.sheets.items()}
        parts.save(self.workbook, path, stored, descriptions, recalculate=recalculate)
