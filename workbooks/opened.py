"""A workbook opened for patching: its parts, and what its cells hold."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from openpyxl.formula.tokenizer import TokenizerError
from openpyxl.formula.translate import Translator
from openpyxl.utils import get_column_letter, range_boundaries

from steelyard.addin.cells import MOST_CELLS
from steelyard.core.errors import SteelyardError
from steelyard.workbooks.formula_calls import calls_ours
from steelyard.workbooks.packagexml import DefinedName, Package
from steelyard.workbooks.parts import read_parts
from steelyard.workbooks.pieces import Value
from steelyard.workbooks.sheetxml import EVERY, CellXml, find_cells, store_values, stored_value

Place = tuple[str, str]
"""Title of a sheet and a cell."""


@dataclass(frozen=True, slots=True, eq=False)
class Formula:
    """A formula as its book holds it.

    Parameters
    ----------
    sheet : str
        Title of its sheet.
    cell : CellXml
        The cell that holds it.
    text : str
        Without ``=``; of a shared formula, as it reads in this cell; empty for a what-if data table.
    area : str
        The cells it fills: one, or the range of an array formula.
    kind : str
        ``"array"``, ``"dataTable"`` or empty.
    ours : bool
        Whether it calls our functions.
    """

    sheet: str
    cell: CellXml
    text: str
    area: str
    kind: str
    ours: bool

    @property
    def place(self) -> Place:
        """Sheet and cell."""
        return self.sheet, self.cell.ref

    @property
    def places(self) -> list[list[str]]:
        """The cells that it fills, row by row."""
        return cells_of(*range_boundaries(self.area))

    def __str__(self) -> str:
        return f"{self.sheet}!{self.cell.ref}"


@dataclass(slots=True)
class OpenedSheet:
    """A sheet: the name of its part, what its cells show (None where nothing), and its formulas."""

    part: str
    values: dict[str, Value] = field(default_factory=dict)
    formulas: list[Formula] = field(default_factory=list)


class OpenedBook:
    """A workbook whose cells can be read and whose stored values can be changed.

    Parameters
    ----------
    path : Path
        Only read.

    Attributes
    ----------
    package : Package
        The parts, which `store` changes.
    sheets : dict
        Titles -> `OpenedSheet`, in the order of the tabs.
    names : list of DefinedName
        The defined names.

    Raises
    ------
    SteelyardError
        For a file that is no plain .xlsx workbook, is damaged, encrypted, signed, or holds macros.
    """

    def __init__(self, path: Path) -> None:
        parts = read_parts(path)
        if any(name.startswith("_xmlsignatures/") for name in parts):
            message = f"{path.name} is signed: a changed copy would not be what was signed"
            raise SteelyardError(message)
        if any("/macrosheets/" in name for name in parts):
            message = f"{path.name} holds macros: save it as .xlsx"
            raise SteelyardError(message)
        try:
            self.package = Package(parts)
            self.names: list[DefinedName] = self.package.names()
            self.sheets = _sheets(self.package)
        except (LookupError, ValueError) as error:
            reason = error if isinstance(error, SteelyardError) else f"it is damaged ({error})"
            message = f"{path.name} can't be used: {reason}"
            raise SteelyardError(message) from None

    def formulas(self) -> Iterator[Formula]:
        """Yield the formulas, sheet by sheet."""
        for sheet in self.sheets.values():
            yield from sheet.formulas

    def store(self, values: Mapping[str, Mapping[str, Value]]) -> None:
        """Write values into cells, sheet title -> cell -> value; nothing else of the parts changes."""
        for title, cells in values.items():
            sheet = self.sheets[title]
            self.package.parts[sheet.part] = store_values(self.package.parts[sheet.part], cells)
        self.sheets |= _sheets(self.package, values)


def cells_of(left: int, top: int, right: int, bottom: int) -> list[list[str]]:
    """Return the cells of a range, row by row.

    Examples
    --------
    >>> cells_of(2, 3, 3, 4)
    [['B3', 'C3'], ['B4', 'C4']]
    """
    letters = [get_column_letter(column) for column in range(left, right + 1)]
    return [[f"{letter}{row}" for letter in letters] for row in range(top, bottom + 1)]


def _sheets(package: Package, only: Mapping[str, object] | None = None) -> dict[str, OpenedSheet]:
    strings = package.strings()
    return {
        title: _read_sheet(title, part, package.parts[part], strings)
        for title, part in package.sheets().items()
        if only is None or title in only
    }


def _read_sheet(title: str, part: str, xml: bytes, strings: Sequence[str]) -> OpenedSheet:
    sheet = OpenedSheet(part)
    masters: dict[str, tuple[str, str, bool]] = {}
    for cell in find_cells(xml, EVERY):
        sheet.values[cell.ref] = stored_value(cell, strings)
        if cell.formula is not None:
            sheet.formulas.append(_formula(title, cell, masters))
    return sheet


def _formula(title: str, cell: CellXml, masters: dict[str, tuple[str, str, bool]]) -> Formula:
    attributes, text = cell.formula_attributes, (cell.formula or "").removeprefix("=")
    kind = attributes.get("t", "normal")
    if kind == "shared":
        master, origin, ours = masters.setdefault(attributes["si"], (text, cell.ref, calls_ours(text)))
        return Formula(title, cell, _translated(master, origin, cell.ref), cell.ref, "", ours)
    if kind in ("array", "dataTable"):
        return Formula(title, cell, text, _filled(title, attributes["ref"]), kind, calls_ours(text))
    return Formula(title, cell, text, cell.ref, "", calls_ours(text))


def _translated(formula: str, origin: str, ref: str) -> str:
    """Return a shared formula as it reads in another cell; as it stands if it can't be read."""
    try:
        return str(Translator(f"={formula}", origin).translate_formula(ref))[1:]
    except TokenizerError:
        return formula


def _filled(title: str, area: str) -> str:
    """Return the range of an array formula, unless it is beyond all measure."""
    left, top, right, bottom = range_boundaries(area)
    if (right - left + 1) * (bottom - top + 1) > MOST_CELLS:
        message = f"the formula of {title}!{area} fills more than {MOST_CELLS:,} cells"
        raise SteelyardError(message)
    return area
