"""Sheets that need page breaks of their own: Excel ignores those while it fits a sheet to pages."""

from __future__ import annotations

from openpyxl.worksheet.pagebreak import Break, ColBreak

from steelyard.workbooks.house import Sheet


def fixed_scale(sheet: Sheet, percent: int) -> None:
    """Print at a scale at which the sheet fits the width of A4 and Letter, so that its own breaks hold."""
    sheet.raw.sheet_properties.pageSetUpPr.fitToPage = False
    sheet.raw.page_setup.scale = percent


def break_here(sheet: Sheet) -> None:
    """Begin a page with the row that is written next."""
    sheet.raw.row_breaks.append(Break(id=sheet.next_row - 1))


def break_after_column(sheet: Sheet, number: int, repeat: str) -> None:
    """Begin a page right of a column, and repeat columns such as ``"A:B"`` there."""
    sheet.raw.col_breaks = ColBreak(brk=[Break(id=number)])
    sheet.raw.print_title_cols = repeat
