"""A worksheet as rows of pieces: filled from top to bottom, then set up for screen and paper."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from copy import copy
from typing import TYPE_CHECKING, Any

from openpyxl.formatting.rule import ColorScaleRule, FormulaRule
from openpyxl.styles import Font, PatternFill
from openpyxl.utils import column_index_from_string, get_column_letter, quote_sheetname
from openpyxl.utils.cell import coordinate_from_string
from openpyxl.worksheet.cell_range import CellRange
from openpyxl.worksheet.formula import ArrayFormula
from openpyxl.worksheet.hyperlink import Hyperlink
from openpyxl.worksheet.table import Table

from steelyard.core.errors import InvalidValue
from steelyard.workbooks import styles
from steelyard.workbooks.checks import Check, joined, validation
from steelyard.workbooks.formulas import check_name, spell
from steelyard.workbooks.measure import Fit
from steelyard.workbooks.pieces import Live, LiveArray, Piece, Put, Value

if TYPE_CHECKING:
    from openpyxl.chart._chart import ChartBase

    from steelyard.workbooks.house import Book

_ROW_CM = 0.45  # the lowest default row of any host, for the room below a chart


class Sheet:
    """A worksheet that is filled a row at a time; made by `Book.sheet`.

    Attributes
    ----------
    next_row : int
        Where `add` writes; formulas that refer to their own row need it.
    stored : dict
        Cell -> value of the formula there.
    descriptions : list of str
        Alternative texts of the charts.
    raw : openpyxl worksheet
        For what the house has no word for.
    """

    def __init__(self, book: Book, title: str, widths: Mapping[str, float]) -> None:
        self.book, self.title = book, title
        self.raw = book.workbook.create_sheet(title)
        self.raw.sheet_view.showGridLines = False
        self.next_row = 1
        self.stored: dict[str, Value] = {}
        self.descriptions: list[str] = []
        self._fit = Fit(widths)
        self._checks: dict[Check, list[str]] = {}
        self._checked: dict[Check, list[tuple[int, int]]] = {}

    def add(self, *pieces: Piece, column: str = "A", height: float | None = None) -> int:
        """Write the next row, and return its number.

        Parameters
        ----------
        *pieces : Put, Live, LiveArray or None
            From left to right; None skips a cell.
        column : str
            Where the row starts.
        height : float, optional
            In points; left out, the spreadsheet program fits it.
        """
        row, place, deep = self.next_row, column_index_from_string(column), 1
        for piece in pieces:
            match piece:
                case None:
                    place += 1
                case Put():
                    place = self._put(row, place, piece)
                case Live():
                    place = self._live(row, place, piece)
                case LiveArray():
                    place = self._array(row, place, piece)
                    deep = max(deep, len(piece.shown))
        if height is not None:
            self.raw.row_dimensions[row].height = height
        self.next_row = row + deep
        return row

    def rows(self, rows: Iterable[Sequence[Piece]], column: str = "A") -> None:
        """Write several rows."""
        for pieces in rows:
            self.add(*pieces, column=column)

    def skip(self, count: int = 1) -> None:
        """Leave rows empty."""
        self.next_row += count

    def ref(self, first: str, last: str = "") -> str:
        """Return an absolute reference with the sheet's name.

        Examples
        --------
        >>> from steelyard.workbooks.house import Book
        >>> Book("Example").sheet("Power grid").ref("B7", "H7")
        "'Power grid'!$B$7:$H$7"
        """
        corners = [coordinate_from_string(cell) for cell in (first, last) if cell]
        cells = ":".join(f"${letters}${row}" for letters, row in corners)
        return f"{quote_sheetname(self.title)}!{cells}"

    def table(self, name: str, headings: Sequence[str], rows: Iterable[Sequence[Piece]]) -> int:
        """Write headings and rows as a table that can be filtered and sorted; return the row of the headings.

        Raises
        ------
        InvalidValue
            For a name that is no name, equal headings, or an array formula, which no table can hold.
        """
        check_name(name)
        if len({heading.lower() for heading in headings}) < len(headings):
            raise InvalidValue("headings", "differ", headings)
        top = self.add(*(Put(heading, "heading") for heading in headings))
        for column in range(1, len(headings) + 1):
            self._fit.widen(column, 2.5)  # the filter button covers the end of a heading
        for pieces in rows:
            if any(isinstance(piece, LiveArray) for piece in pieces):
                raise InvalidValue("table", "hold no array formula", name)
            self.add(*pieces)
        bottom = max(self.next_row - 1, top + 1)
        area = f"A{top}:{get_column_letter(len(headings))}{bottom}"
        self.raw.add_table(Table(displayName=name, name=name, ref=area))
        return top

    def chart(self, chart: ChartBase, description: str, anchor: str = "") -> None:
        """Place a chart at a cell, or below what is written.

        Parameters
        ----------
        chart : openpyxl chart
            For instance from `charts.curve_chart`.
        description : str
            What it shows, read out to those who can't see it.
        """
        if not anchor:
            anchor = f"A{self.next_row}"
            self.skip(math.ceil(chart.height / _ROW_CM) + 1)
        self.raw.add_chart(chart, anchor)
        self.descriptions.append(description)

    def check(self, area: str, check: Check) -> None:
        """Let a whole area take only what a check allows."""
        self._checks.setdefault(check, []).append(area)

    def freeze(self, cell: str) -> None:
        """Keep the rows above and the columns left of a cell in sight."""
        self.raw.freeze_panes = cell

    def protect(self) -> None:
        """Lock all but the inputs, without a password: a guard against slips, no security."""
        guard = self.raw.protection
        guard.sheet = True
        guard.formatCells = guard.formatColumns = guard.formatRows = False
        guard.autoFilter = guard.sort = False

    def colour_scale(self, area: str, low: float = 0.0, high: float = 1.0) -> None:
        """Shade numbers from white to blue, light enough that the digits stay readable in grey too."""
        ends = {"start_value": low, "start_color": styles.WHITE, "end_value": high, "end_color": styles.DEEP}
        self.raw.conditional_formatting.add(area, ColorScaleRule(start_type="num", end_type="num", **ends))

    def flag(self, area: str, formula: str) -> None:
        """Show cells as warnings where a formula, written for the first of them, is true."""
        font = Font(bold=True, color=styles.RUST)
        fill = PatternFill("solid", start_color=styles.BLUSH, end_color=styles.BLUSH)
        condition = spell(formula, self.book.host).removeprefix("=")
        self.raw.conditional_formatting.add(area, FormulaRule([condition], font=font, fill=fill))

    def print_setup(
        self, landscape: bool = False, repeat: str = "", area: str = "", one_page: bool = False
    ) -> None:
        """Fit the sheet to the width of A4 (and Letter), with the book's title and page numbers.

        Parameters
        ----------
        landscape : bool
            Whether the long side lies across.
        repeat : str
            Rows repeated on every page, e.g. ``"1:5"``.
        area : str
            What is printed, e.g. ``"A1:H60"``; everything if left out.
        one_page : bool
            Whether the height has to fit on one page as well.
        """
        page, margins = self.raw.page_setup, self.raw.page_margins
        page.orientation = "landscape" if landscape else "portrait"
        page.paperSize = self.raw.PAPERSIZE_A4
        page.fitToWidth, page.fitToHeight = 1, int(one_page)
        self.raw.sheet_properties.pageSetUpPr.fitToPage = True
        margins.left = margins.right = 0.5
        margins.top = margins.bottom = 0.75
        margins.header = margins.footer = 0.35
        self.raw.print_title_rows = repeat or None
        self.raw.print_area = area or None
        header, footer = self.raw.oddHeader, self.raw.oddFooter
        for part, text in (
            (header.left, self.book.title.replace("&", "&&")),
            (header.right, "&A"),
            (footer.left, self.book.imprint.replace("&", "&&")),
            (footer.right, "Page &P of &N"),
        ):
            part.text, part.font, part.size = text, f"{styles.FONT},Regular", 8

    def finish(self) -> None:
        """Settle widths, heights and checks; called by `Book.save`."""
        self._fit.settle(self.raw)
        for check, cells in self._checked.items():
            self._checks.setdefault(check, []).extend(joined(cells))
        for check, areas in self._checks.items():
            self.raw.add_data_validation(validation(check, areas))
        self._checks, self._checked = {}, {}

    def _put(self, row: int, column: int, piece: Put) -> int:
        cell = self._cell(row, column, piece.value, piece.style, piece.span)
        if piece.check is not None:
            self._checked.setdefault(piece.check, []).append((column, row))
        if piece.link:
            cell.hyperlink = Hyperlink(ref=cell.coordinate, location=piece.link)
        return column + piece.span

    def _live(self, row: int, column: int, piece: Live) -> int:
        cell = self._cell(row, column, piece.shown, piece.style, piece.span)
        cell.value = spell(piece.formula, self.book.host)
        self.stored[cell.coordinate] = piece.shown
        return column + piece.span

    def _array(self, row: int, column: int, piece: LiveArray) -> int:
        for down, values in enumerate(piece.shown):
            for across, value in enumerate(values):
                self._cell(row + down, column + across, value, piece.style)
        right = column + len(piece.shown[0])
        master = self.raw.cell(row, column)
        last = self.raw.cell(row + len(piece.shown) - 1, right - 1)
        area = f"{master.coordinate}:{last.coordinate}"
        master.value = ArrayFormula(area, spell(piece.formula, self.book.host))
        self.stored[master.coordinate] = piece.shown[0][0]
        return right

    def _cell(self, row: int, column: int, value: Value, style: str, span: int = 1) -> Any:
        cell = self.raw.cell(row, column, value)
        cell._style = copy(self.book.style_array(style))
        if isinstance(value, str):
            cell.data_type = "s"  # a text that looks like a formula or an error stays a text
        elif isinstance(value, bool) or (isinstance(value, float) and not math.isfinite(value)):
            place = f"{self.title}!{cell.coordinate}"
            raise InvalidValue(place, "be a text or a finite number", value)
        self._fit.see(row, column, value, style, span)
        if span > 1:
            self._merge(row, column, span)
        return cell

    def _merge(self, row: int, column: int, span: int) -> None:
        last = column + span - 1
        for covered in range(column + 1, last + 1):
            self.raw.cell(row, covered)._style = copy(self.raw.cell(row, column)._style)
        # merge_cells would set the borders, which the cells have already, at ten times the cost
        self.raw.merged_cells.ranges.add(CellRange(None, column, row, last, row))
