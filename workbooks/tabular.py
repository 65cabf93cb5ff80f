"""Rows of cells out of .xlsx and .csv files that may be wrong, huge or hostile."""

from __future__ import annotations

import csv
import io
import re
import warnings
import zipfile
import zlib
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from datetime import date, datetime, time, timedelta
from decimal import Decimal
from pathlib import Path
from typing import Any, NoReturn

from openpyxl import load_workbook

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.parts import MEGABYTE, check_package

LARGEST = 25 * MEGABYTE  # unpacked: a list of 2,000 rows takes 2 MB
MOST_ROWS = 10_000
MOST_TAGS = {"xl/worksheets/": 600_000, "xl/sharedStrings": 600_000, "": 30_000}  # by start of a part's name
MOST_COLUMNS = 100
BLANK_ROWS = 1_000
PREFERRED_SHEET = "requests"

_DAMAGE = (
    AttributeError,
    EOFError,
    LookupError,
    OverflowError,
    SyntaxError,
    TypeError,
    ValueError,
    zipfile.BadZipFile,
    zlib.error,
)


@dataclass(frozen=True, slots=True)
class Unusable:
    """A cell that holds no value to work with."""

    shown: str


_FORMULA = Unusable("a formula without a stored value")

Raw = float | str | Unusable | None
Row = tuple[int, list[Raw]]


@dataclass(frozen=True, slots=True)
class Rows:
    """The rows of a file that are not blank, with their numbers, and what marks its decimals may have."""

    found: list[Row]
    comma_allowed: bool = False


def read_rows(path: Path, sheet: str = "") -> Rows:
    """Return the rows of a workbook's sheet *Requests* (or its first sheet), or of a .csv file.

    Parameters
    ----------
    path : Path
        Ends in .xlsx or .csv.
    sheet : str, optional
        Another sheet of a workbook; no rows where it is missing.

    Returns
    -------
    Rows
        Numbers of cells in percent format come as text such as ``"2%"``, dates as ``"2026-05-01"``.

    Raises
    ------
    SteelyardError
        When the file can't be read, is too large, or is of another format.
    """
    suffix = path.suffix.lower()
    if suffix not in (".xlsx", ".csv"):
        _refuse(path, "must end in .xlsx or .csv")
    try:
        rows = _csv(path) if suffix == ".csv" else _xlsx(path, sheet)
    except OSError as error:
        _refuse(path, f"can't be read ({error.strerror})")
    if len(rows.found) > MOST_ROWS:
        _refuse(path, f"must have at most {MOST_ROWS:,} rows")
    return rows


def _refuse(path: Path, reason: str) -> NoReturn:
    message = f"{path.name} {reason}"
    raise SteelyardError(message) from None


def _kept(rows: Iterable[tuple[int, Sequence[Raw]]]) -> Iterator[Row]:
    """Leave out blank rows; end after many of them, or when there are too many others."""
    blank = kept = 0
    for number, cells in rows:
        if all(cell is None for cell in cells):
            blank += 1
            if blank == BLANK_ROWS:
                return
            continue
        blank, kept = 0, kept + 1
        yield number, list(cells)
        if kept > MOST_ROWS:
            return


# Workbooks


def _xlsx(path: Path, sheet: str) -> Rows:
    check_package(path, LARGEST, links=False)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # openpyxl tells of features that a list does not need
        try:
            _check_parts(path)
            rows = _sheet_rows(path, sheet, calculated=False)
            if any(cell is _FORMULA for _, cells in rows for cell in cells):
                rows = _with_values(rows, dict(_sheet_rows(path, sheet, calculated=True)))
        except _DAMAGE as error:
            if isinstance(error, SteelyardError):
                raise
            _refuse(path, f"is damaged ({type(error).__name__})")
    return Rows(rows)


def _check_parts(path: Path) -> None:
    """Refuse what makes a reader work for minutes, and entities, which no spreadsheet program writes."""
    with zipfile.ZipFile(path) as archive:
        for entry in archive.infolist():
            if not entry.filename.endswith((".xml", ".rels")):
                continue
            data = archive.read(entry)
            most = next(most for start, most in MOST_TAGS.items() if entry.filename.startswith(start))
            if data.count(b"<") > most:
                _refuse(path, f"holds too much for a request list: {entry.filename}")
            if b"<!DOCTYPE" in data:
                _refuse(path, "is damaged: a part declares a document type")


def _sheet_rows(path: Path, wanted: str, calculated: bool) -> list[Row]:
    with path.open("rb") as file:
        workbook = load_workbook(file, read_only=True, data_only=calculated, keep_links=False)
        sheets = workbook.worksheets
        title = (wanted or PREFERRED_SHEET).lower()
        sheet = next((sheet for sheet in sheets if sheet.title.lower() == title), None)
        if sheet is None and wanted:
            return []
        sheet = sheet or sheets[0]
        sheet.reset_dimensions()  # what a file says about its own size is no promise
        rows = sheet.iter_rows(max_col=MOST_COLUMNS)
        return list(_kept((number, [_cell(cell) for cell in row]) for number, row in enumerate(rows, 1)))


def _with_values(rows: list[Row], calculated: dict[int, list[Raw]]) -> list[Row]:
    """Put stored values in the place of formulas; a formula without one stays unusable."""
    filled: list[Row] = []
    for number, cells in rows:
        values = calculated.get(number, [None] * len(cells))
        merged = [
            (value or None) if cell is _FORMULA and value is not None else cell
            for cell, value in zip(cells, values, strict=True)
        ]
        if any(cell is not None for cell in merged):
            filled.append((number, merged))
    return filled


def _cell(cell: Any) -> Raw:
    value = cell.value
    if value is None:
        return "" if cell.data_type == "str" else None  # only a formula's empty text comes like this
    match cell.data_type, value:
        case "f", _:
            return _FORMULA
        case "e", _:
            return Unusable(str(value))
        case _, bool():
            return "TRUE" if value else "FALSE"
        case _, int() | float():
            return _percent(value) if "%" in cell.number_format else float(value)
        case _, datetime():
            return value.date().isoformat() if value.time() == time() else value.isoformat(" ")
        case _, date() | time() | timedelta():
            return str(value)
    return str(value).strip() or None


def _percent(value: float) -> str:
    """Return the percent text of a number, so that 100% stays apart from a bare 1."""
    return f"{Decimal(repr(value)).scaleb(2).normalize():f}%"


# Text files


def _csv(path: Path) -> Rows:
    if path.stat().st_size > LARGEST:
        _refuse(path, f"is too large: more than {LARGEST / MEGABYTE:.0f} MB")
    try:
        text = path.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError:
        _refuse(path, "must be text in UTF-8 (in Excel: save as “CSV UTF-8”)")
    if "\0" in text:
        _refuse(path, "must be text in UTF-8, but holds binary data")
    delimiter = _delimiter(path, text)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
    try:
        rows = list(_kept((n, [cell.strip() or None for cell in cells]) for n, cells in enumerate(reader, 1)))
    except csv.Error as error:
        _refuse(path, f"is damaged in line {reader.line_num} ({error})")
    return Rows(rows, comma_allowed=delimiter == ";")


def _delimiter(path: Path, text: str) -> str:
    """Return what separates the headings; a guess from the rows would depend on what they hold."""
    heading = next((line for line in text.splitlines() if line.strip()), "")
    found = [mark for mark in ",;\t" if mark in re.sub(r'"[^"]*"', "", heading)]
    if len(found) > 1:
        _refuse(path, "must separate its headings by one mark: a comma, a semicolon or a tab")
    return found[0] if found else ","
