"""Share copies: a book that shows its numbers everywhere, with values in the place of our formulas.

The copy is made by patching: our formulas give way to the values stored beside them and are listed on a sheet
of their own, native formulas stay live and are recalculated on opening, and whatever else the book holds is
kept byte for byte.
"""

from __future__ import annotations

import hashlib
import os
import platform
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path

from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError
from steelyard.workbooks.formula_calls import as_shown, calls_ours, numbered_links
from steelyard.workbooks.opened import Formula, OpenedBook
from steelyard.workbooks.packagexml import Package
from steelyard.workbooks.parts import build_date, write_parts
from steelyard.workbooks.pieces import Fault, Value
from steelyard.workbooks.recalculation import recalculate
from steelyard.workbooks.sheetxml import freeze_cell, plain_sheet
from steelyard.workbooks.xmlbytes import Element, find_elements, splice

_MAYBE = re.compile(rb"SY[_.]", re.IGNORECASE)
_FORMULAS, _PROVENANCE = "Formulas", "Provenance"
_NAMED = 5  # so many cells or places are named in a message


@dataclass(frozen=True, slots=True)
class Shared:
    """What a share copy holds: formulas that became values, native ones that stay live, values recomputed."""

    frozen: int
    live: int
    recomputed: int

    def __str__(self) -> str:
        text = f"{self.frozen:,} formulas became values, {self.live:,} native formulas stay live"
        return text + (f", {self.recomputed:,} cells had to be recomputed" if self.recomputed else "")


def share_book(source: Path, target: Path) -> Shared:
    """Write a copy of a book that needs no add-in.

    Parameters
    ----------
    source : Path
        The workbook, as built or as edited and saved in Excel or Calc. Only read.
    target : Path
        The copy to write.

    Raises
    ------
    SteelyardError
        Before anything is written: for what could not be kept, and for cells without a value that can't be
        recomputed.
    """
    _check_target(source, target)
    book = OpenedBook(source)
    ours = [formula for formula in book.formulas() if formula.ours]
    if not ours:
        _refuse(source, "holds no formula with a function of Steelyard: it can be shared as it is")
    obstacles = list(_obstacles(book))
    if obstacles:
        _refuse(source, f"can't be shared: {_some(obstacles)}; take that out of the book first")
    recomputed = _fill_gaps(source, book, ours)
    ours = [formula for formula in book.formulas() if formula.ours]
    live = sum(not formula.ours for formula in book.formulas())
    shared = Shared(len(ours), live, recomputed)
    _freeze(book)
    _drop_links(book.package, ours)
    book.package.drop("calcChain")
    book.package.recalculate_on_opening()
    _add_sheets(book, ours, source, shared)
    write_parts(target, book.package.parts)
    return shared


def _check_target(source: Path, target: Path) -> None:
    if target.suffix.lower() != ".xlsx":
        message = f"the copy must be an .xlsx file, but got {target.name}"
        raise SteelyardError(message)
    if target.exists() and source.exists() and target.samefile(source):
        message = f"the copy must be another file than the book, but got {target}"
        raise SteelyardError(message)


def _refuse(source: Path, reason: str) -> None:
    message = f"{source.name} {reason}"
    raise SteelyardError(message)


def _some(things: Sequence[str]) -> str:
    more = f" and {len(things) - _NAMED:,} more" if len(things) > _NAMED else ""
    return ", ".join(things[:_NAMED]) + more


# What can't be kept


def _obstacles(book: OpenedBook) -> Iterator[str]:
    """Yield what the copy could not keep: our functions outside cells, and what-if tables."""
    if any(part.startswith("xl/revisions/") for part in book.package.parts):
        yield "it keeps the history of a shared workbook"
    for name in book.names:
        if calls_ours(name.text):
            yield f"the defined name {name.name} calls a function of Steelyard"
    for formula in book.formulas():
        if formula.kind == "dataTable":
            yield f"{formula.sheet}!{formula.area} is a what-if data table"
    for title, sheet in book.sheets.items():
        yield from _rules(title, book.package.parts[sheet.part])
    for table, column, _, element in _table_formulas(book.package):
        if element.name == "totalsRowFormula":
            yield f"the total of {column} in the table {table} calls a function of Steelyard"


def _rules(title: str, xml: bytes) -> Iterator[str]:
    """Yield the conditional formats and validations that call our functions."""
    end = xml.rfind(b"sheetData>")
    if not _MAYBE.search(xml, end):
        return
    owners = find_elements(xml, {"conditionalFormatting", "dataValidation"})
    for element in find_elements(xml, {"formula", "formula1", "formula2", "f"}):
        if element.start > end and calls_ours(element.text):
            owner = next(owner for owner in owners if owner.start < element.start < owner.stop)
            what = "validation" if owner.name == "dataValidation" else "conditional format"
            cells = owner.attributes.get("sqref", "")
            yield f"a {what} of {title}!{cells}".rstrip("!") + " calls a function of Steelyard"


def _table_formulas(package: Package) -> Iterator[tuple[str, str, str, Element]]:
    """Yield the formulas of ours that tables keep for their columns: table, column, part and element.

    The last one of a part comes first, so that taking one out leaves the places of the others right.
    """
    for part, xml in package.parts.items():
        if not re.fullmatch(r"xl/tables/[^/]+\.xml", part) or not _MAYBE.search(xml):
            continue
        table = find_elements(xml, {"table"})[0].attributes.get("displayName", part)
        columns = find_elements(xml, {"tableColumn"})
        for element in reversed(find_elements(xml, {"calculatedColumnFormula", "totalsRowFormula"})):
            if calls_ours(element.text):
                column = next(c for c in columns if c.start < element.start < c.stop)
                yield table, column.attributes.get("name", ""), part, element


# Values


def _fill_gaps(source: Path, book: OpenedBook, ours: Sequence[Formula]) -> int:
    """Recompute the book where formulas of ours have no value or show an error; return the cells changed."""
    if not _gaps(book, ours):
        return 0
    found = recalculate(book)
    book.store(found.values)
    gaps = _gaps(book, ours)
    if gaps:
        reasons = {str(formula): reason for formula, reason in found.unfollowed.items()}
        told = [f"{cell} ({reasons.get(cell, 'an error value')})" for cell in gaps]
        _refuse(
            source, f"can't be shared: no value is known for {_some(told)}; recalculate it with the add-in"
        )
    return sum(map(len, found.values.values()))


def _gaps(book: OpenedBook, ours: Sequence[Formula]) -> list[str]:
    return [str(formula) for formula in ours if _lacks_value(book, formula)]


def _lacks_value(book: OpenedBook, formula: Formula) -> bool:
    values = book.sheets[formula.sheet].values
    shown = [values.get(ref) for row in formula.places for ref in row]
    return values[formula.cell.ref] is None or any(isinstance(value, Fault) for value in shown)


def _freeze(book: OpenedBook) -> None:
    parts = book.package.parts
    for sheet in book.sheets.values():
        xml = parts[sheet.part]
        edits = [freeze_cell(formula.cell, xml) for formula in sheet.formulas if formula.ours]
        parts[sheet.part] = splice(xml, edits)
    for _, _, part, element in list(_table_formulas(book.package)):
        parts[part] = splice(parts[part], [(element.start, element.stop, b"")])


def _drop_links(package: Package, ours: Sequence[Formula]) -> None:
    """Drop the links to the add-in that nothing uses any more, as long as no other link gets a new number."""
    through = {link for formula in ours for link in numbered_links(formula.cell.formula or "")}
    for number in range(len(package.links()), 0, -1):
        mark = f"[{number}]".encode()
        texts = (
            xml
            for part, xml in package.parts.items()
            if part.endswith(".xml") and not part.startswith("xl/externalLinks/")
        )
        if number not in through or any(mark in xml for xml in texts):
            return
        package.drop_last_link()


# The new sheets


def _add_sheets(book: OpenedBook, ours: Sequence[Formula], source: Path, shared: Shared) -> None:
    package = book.package
    rows = [_formula_row(book, formula) for formula in ours]
    titles = [package.free_title(_FORMULAS), package.free_title(_PROVENANCE)]
    look = package.namespace(), package.add_wrapping_style()
    package.add_sheet(
        titles[0], plain_sheet(("Sheet", "Cell", "Formula", "Value"), rows, (24, 10, 62, 44), *look)
    )
    facts = _facts(source, shared, titles[0])
    package.add_sheet(titles[1], plain_sheet(("Share copy", "made by Steelyard"), facts, (34, 90), *look))


def _formula_row(book: OpenedBook, formula: Formula) -> list[Value]:
    text = as_shown(formula.text)
    shown = f"{{{text}}}" if formula.kind == "array" else text
    value = book.sheets[formula.sheet].values[formula.cell.ref]
    return [formula.sheet, formula.area, shown, str(value).upper() if isinstance(value, bool) else value]


def _facts(source: Path, shared: Shared, listing: str) -> list[list[Value]]:
    given = os.environ.get("SOURCE_DATE_EPOCH")
    date = build_date() if given else datetime.now(UTC)
    return [
        ["Made from the book", source.name],
        ["SHA-256 of that book", hashlib.sha256(source.read_bytes()).hexdigest()],
        ["Date", f"{date:%Y-%m-%d}"],
        ["Steelyard", VERSION],
        ["Python", platform.python_version()],
        ["numpy", version("numpy")],
        ["scipy", version("scipy")],
        ["Formulas that became values", shared.frozen],
        ["Native formulas that stay live", shared.live],
        ["Cells recomputed for this copy", shared.recomputed],
        [],
        ["What this copy is", f"The formulas of Steelyard became values; sheet {listing} lists their texts."],
        [None, "Native formulas stay live; recalculated on opening, they check it without Steelyard."],
        [None, "The values no longer follow the inputs: to change a plan, edit the book, not this copy."],
        ["Caution", "Where a failure can hurt someone, codes, contracts and a qualified person decide."],
    ]
