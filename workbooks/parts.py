"""Workbooks as zips of parts: saving with stored values and fixed bytes, and reading safely.

Calculation on opening: our own cells carry values that the same core computed, so a book is saved with
``fullCalcOnLoad="0"`` and a current engine number. With the add-in a cell is recalculated when its inputs
change; without it readers keep seeing numbers, where a full recalculation would leave #NAME?. A file whose
formulas are all the spreadsheet's own (a share copy, a record) is saved with ``recalculate=True``.
"""

from __future__ import annotations

import os
import shutil
import zipfile
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from datetime import UTC, datetime
from functools import partial
from pathlib import Path
from typing import IO, Any

from openpyxl import Workbook
from openpyxl.drawing.spreadsheet_drawing import SpreadsheetDrawing
from openpyxl.workbook.properties import CalcProperties
from openpyxl.worksheet._writer import WorksheetWriter
from openpyxl.writer.excel import ExcelWriter

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.pieces import Value
from steelyard.workbooks.sheetxml import describe, fill_rows, rows_xml

_OLDEST = datetime(1980, 1, 1)  # the first date that a zip can hold
_ENGINE = 191029  # an older calculation engine makes Excel recalculate on opening
MEGABYTE = 1_000_000


# Saving


def build_date() -> datetime:
    """Return the date written into files: SOURCE_DATE_EPOCH (UTC seconds), else a fixed one.

    Raises
    ------
    SteelyardError
        When SOURCE_DATE_EPOCH is no whole number.
    """
    text = os.environ.get("SOURCE_DATE_EPOCH", "")
    if not text:
        return _OLDEST
    try:
        return max(_OLDEST, datetime.fromtimestamp(int(text), UTC).replace(tzinfo=None))
    except (ValueError, OverflowError, OSError):
        message = f"SOURCE_DATE_EPOCH must be a whole number of seconds, but got {text}"
        raise SteelyardError(message) from None


def save(
    workbook: Workbook,
    path: Path,
    stored: Mapping[str, Mapping[str, Value]],
    descriptions: Mapping[str, Sequence[str]] | None = None,
    *,
    recalculate: bool = False,
) -> None:
    """Save a workbook with reproducible bytes and the values of its formulas.

    Parameters
    ----------
    workbook : openpyxl.Workbook
        Its date properties are overwritten.
    path : Path
        Replaced in one step when all is written.
    stored : mapping
        Sheet title -> cell -> value, e.g. ``{"Register": {"B7": 0.93}}``.
    descriptions : mapping, optional
        Sheet title -> alternative texts of its charts, in their order.
    recalculate : bool
        Whether the reader's program computes all formulas on opening.
    """
    workbook.calculation = CalcProperties(calcId=_ENGINE, fullCalcOnLoad=recalculate)
    workbook.properties.created = workbook.properties.modified = build_date()
    with replacing(path) as file, _Archive(file) as archive:
        _BookWriter(workbook, archive, stored, descriptions or {}).write_data()


class _BookWriter(ExcelWriter):  # type: ignore[misc]
    """openpyxl's writer, but for the rows of sheets, which get their values, and the texts of charts."""

    def __init__(
        self,
        workbook: Workbook,
        archive: _Archive,
        stored: Mapping[str, Mapping[str, Value]],
        descriptions: Mapping[str, Sequence[str]],
    ) -> None:
        super().__init__(workbook, archive)
        self._stored, self._descriptions = stored, descriptions

    def write_worksheet(self, ws: Any) -> None:
        ws._drawing = SpreadsheetDrawing()
        ws._drawing.charts, ws._drawing.images = ws._charts, ws._images
        writer = _SheetWriter(ws)
        writer.stored = self._stored.get(ws.title, {})
        writer.write()
        ws._rels = writer._rels
        frame = Path(writer.out).read_bytes()
        writer.cleanup()
        self._archive.writestr(ws.path[1:], fill_rows(frame, writer.rows_xml))
        self.manifest.append(ws)
        self._archive.edits[f"xl/drawings/drawing{len(self._drawings) + 1}.xml"] = partial(
            describe, texts=self._descriptions.get(ws.title, ())
        )


class _SheetWriter(WorksheetWriter):  # type: ignore[misc]
    """openpyxl's writer of all that surrounds the rows of a sheet."""

    stored: Mapping[str, Value]
    rows_xml = b""

    def write_rows(self) -> None:
        with self.xf.send(True).element("sheetData"):
            self.rows_xml = rows_xml(self.ws, self.rows(), self.stored)
        self.xf.send(None)


@contextmanager
def replacing(path: Path) -> Iterator[IO[bytes]]:
    """Open a temporary neighbour for writing, which takes the place of `path` if nothing fails.

    Raises
    ------
    SteelyardError
        When the file can't be written, e.g. because it is open in a spreadsheet program.
    """
    temporary = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        with temporary.open("wb") as file:
            yield file
        if path.exists():
            shutil.copymode(path, temporary)  # a book that others may not read stays so
        temporary.replace(path)
    except OSError as error:
        hint = " (is it open in a spreadsheet program?)" if isinstance(error, PermissionError) else ""
        message = f"{path} can't be written: {error.strerror}{hint}"
        raise SteelyardError(message) from None
    finally:
        temporary.unlink(missing_ok=True)


def write_parts(path: Path, parts: Mapping[str, bytes]) -> None:
    """Write parts as a zip, in the mapping's order, with fixed dates and attributes."""
    with replacing(path) as file, _Archive(file) as archive:
        for name, data in parts.items():
            archive.writestr(name, data)


class _Archive(zipfile.ZipFile):
    """A zip with fixed dates and attributes that edits parts while they are written."""

    def __init__(self, file: IO[bytes]) -> None:
        super().__init__(file, "w", zipfile.ZIP_DEFLATED)
        self.edits: dict[str, Callable[[bytes], bytes]] = {}

    def writestr(self, zinfo_or_arcname: Any, data: Any, *_: Any, **__: Any) -> None:
        entry = zipfile.ZipInfo(zinfo_or_arcname, _OLDEST.timetuple()[:6])
        entry.compress_type, entry.create_system, entry.external_attr = zipfile.ZIP_DEFLATED, 3, 0o644 << 16
        content = data.encode() if isinstance(data, str) else data
        super().writestr(entry, self.edits.get(entry.filename, bytes)(content))


# Reading


def read_parts(path: Path, limit: int = 2_000 * MEGABYTE) -> dict[str, bytes]:
    """Return the parts of a workbook in their order, after the checks of `check_package`."""
    check_package(path, limit)
    with zipfile.ZipFile(path) as archive:
        return {entry.filename: archive.read(entry) for entry in archive.infolist()}


def check_package(path: Path, limit: int, links: bool = True) -> None:
    """Refuse a file that is no plain .xlsx workbook, before anything is unpacked.

    Parameters
    ----------
    path : Path
        The file.
    limit : int
        Bytes that its parts may have together when unpacked.
    links : bool
        Whether links to other workbooks are tolerated.

    Raises
    ------
    SteelyardError
        For what is missing, encrypted, oversized, of another format, with macros or (unless tolerated) links.
    """
    try:
        with path.open("rb") as file:
            start = file.read(8)
        with zipfile.ZipFile(path) as archive:
            _check_entries(path, archive, limit, links)
    except OSError as error:
        _refuse(path, f"can't be read ({error.strerror})")
    except zipfile.BadZipFile:
        if start == b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1":
            _refuse(path, "is protected with a password or an old .xls file: save it as .xlsx without one")
        _refuse(path, "is no .xlsx workbook")


def _check_entries(path: Path, archive: zipfile.ZipFile, limit: int, links: bool) -> None:
    entries = archive.infolist()
    names = [entry.filename for entry in entries]
    size = sum(entry.file_size for entry in entries)
    if any(entry.flag_bits & 1 for entry in entries):
        _refuse(path, "is encrypted: save it without a password")
    if size > limit or len(entries) > 50_000:
        _refuse(path, f"is too large: {len(entries)} parts, {size / MEGABYTE:,.0f} MB unpacked")
    if len(set(names)) < len(names):
        _refuse(path, "is damaged: it holds the same part twice")
    if "[Content_Types].xml" not in names or "xl/workbook.bin" in names:
        _refuse(path, "is no .xlsx workbook")
    if any("vbaProject" in name for name in names) or b"macroEnabled" in archive.read("[Content_Types].xml"):
        _refuse(path, "holds macros: save it as .xlsx")
    if not links and any(name.startswith("xl/externalLinks/") for name in names):
        _refuse(path, "links to other workbooks: replace the linked formulas by their values")


def _refuse(path: Path, reason: str) -> None:
    message = f"{path.name} {reason}"
    raise SteelyardError(message) from None
