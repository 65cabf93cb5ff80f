"""The XML of sheets: finding cells and patching them, and nothing else of their bytes.

Only this module, `packagexml` (relations, content types, the list of sheets) and `xmlbytes` below them touch
XML.
"""

from __future__ import annotations

import math
from collections.abc import Container, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any
from xml.sax.saxutils import escape, quoteattr

from openpyxl.utils import get_column_letter
from openpyxl.worksheet.formula import ArrayFormula

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.measure import line_count, text_width
from steelyard.workbooks.pieces import Fault, Value
from steelyard.workbooks.styles import FONT, SIZE
from steelyard.workbooks.xmlbytes import Edit, end_of, parser, run, splice, start_tag


class _Every:
    """Contains everything."""

    def __contains__(self, _: object) -> bool:
        return True


EVERY: Container[str] = _Every()

_USUAL_SIZE, _LINE = 11, 15  # points: letters and lines of a book's own first font
_BOLD = f'<rPr><b/><sz val="{SIZE}"/><rFont val="{FONT}"/></rPr>'


@dataclass(slots=True)
class CellXml:
    """A cell as it stands in a sheet's XML, with the places of its bytes."""

    ref: str
    attributes: dict[str, str]
    start: int
    stop: int = 0
    formula: str | None = None
    formula_attributes: dict[str, str] = field(default_factory=dict)
    formula_place: tuple[int, int] = (0, 0)
    value: str = ""
    prefix: str = ""


def find_cells(xml: bytes, wanted: Container[str] | None = None) -> list[CellXml]:
    """Return the wanted cells of a sheet, or, by default, all that hold a formula.

    Raises
    ------
    SteelyardError
        For XML that is damaged, holds a document type, is not written in UTF-8, or does not say where its
        cells are.
    """
    found: list[CellXml] = []
    cell: CellXml | None = None
    texts: list[str] = []
    prefix = ""
    phonetic = False

    def start(tag: str, attributes: dict[str, str]) -> None:
        nonlocal cell, prefix, phonetic
        if tag == prefix + "c":
            ref = attributes.get("r", "")
            if not ref:
                message = (
                    "the workbook leaves out where its cells are: save it with a spreadsheet program first"
                )
                raise SteelyardError(message)
            if wanted is None or ref in wanted:
                cell = CellXml(ref, attributes, reader.CurrentByteIndex, prefix=prefix)
        elif cell is not None:
            if tag == prefix + "f":
                cell.formula_attributes, cell.formula_place = attributes, (reader.CurrentByteIndex, 0)
            phonetic = phonetic or tag == prefix + "rPh"
            texts.clear()
            reader.CharacterDataHandler = texts.append
        elif tag.endswith("worksheet"):
            prefix = tag.removesuffix("worksheet")

    def end(tag: str) -> None:
        nonlocal cell, phonetic
        if cell is None:
            return
        if tag == prefix + "f":
            cell.formula = "".join(texts)
            cell.formula_place = (cell.formula_place[0], end_of(tag, xml, reader.CurrentByteIndex))
        elif tag in (prefix + "v", prefix + "t") and not phonetic:
            cell.value += "".join(texts)
        elif tag == prefix + "rPh":
            phonetic = False
        elif tag == prefix + "c":
            cell.stop = end_of(tag, xml, reader.CurrentByteIndex)
            if wanted is not None or cell.formula is not None:
                found.append(cell)
            cell, reader.CharacterDataHandler = None, None

    reader = parser(start, end)
    run(reader, xml)
    return found


def stored_value(cell: CellXml, strings: Sequence[str]) -> Value:
    """Return what a cell shows; an error is a `Fault`, a cell without a value None.

    Parameters
    ----------
    cell : CellXml
        From `find_cells`.
    strings : sequence of str
        The workbook's shared strings.
    """
    kind = cell.attributes.get("t", "n")
    if kind in ("str", "inlineStr"):
        return cell.value
    if not cell.value:
        return None
    match kind:
        case "n":
            return float(cell.value)
        case "s":
            return strings[int(cell.value)]
        case "b":
            return cell.value == "1"
        case "e":
            return Fault(cell.value)
    return cell.value


def render_cell(cell: CellXml, value: Value, xml: bytes, formula: bool = True) -> bytes:
    """Return a cell's XML with another value, with or without its formula."""
    kept = xml[slice(*cell.formula_place)].decode() if formula and cell.formula is not None else ""
    kind, body = _content(value, kept, cell.prefix)
    attributes = {name: text for name, text in cell.attributes.items() if name not in ("t", "vm")}
    written = start_tag(f"{cell.prefix}c", attributes, "").decode()
    return f"{written}{kind}>{body}</{cell.prefix}c>".encode()


def freeze_cell(cell: CellXml, xml: bytes) -> Edit:
    """Return the edit that turns a formula into the value that is stored beside it, digit for digit.

    An empty text becomes the formula ``=""``: stored as a text it would be no text any more where Calc reads
    it, and formulas that ask ISTEXT would change their minds. What marks a dynamic array goes too.
    """
    attributes = {name: text for name, text in cell.attributes.items() if name not in ("cm", "vm")}
    if attributes.get("t") != "str":
        first, last = cell.formula_place
        inside = xml[xml.index(b">", cell.start) + 1 : first] + xml[last : cell.stop]
        return cell.start, cell.stop, start_tag(f"{cell.prefix}c", attributes, ">") + inside
    formula = "" if cell.value else f'<{cell.prefix}f>""</{cell.prefix}f>'
    kind, body = _content(cell.value, formula, cell.prefix)
    del attributes["t"]
    written = start_tag(f"{cell.prefix}c", attributes, "").decode()
    return cell.start, cell.stop, f"{written}{kind}>{body}</{cell.prefix}c>".encode()


def _content(value: Value, formula: str, prefix: str = "") -> tuple[str, str]:
    """Return the type attribute and the inner XML of a cell.

    Numbers are written with the shortest text that reads back to the same number (up to 17 digits).
    """
    if isinstance(value, str):
        text = escape(value)
        if isinstance(value, Fault):
            return ' t="e"', f"{formula}<{prefix}v>{text}</{prefix}v>"
        if formula:
            return ' t="str"', f"{formula}<{prefix}v>{text}</{prefix}v>"
        return (
            ' t="inlineStr"',
            f'<{prefix}is><{prefix}t xml:space="preserve">{text}</{prefix}t></{prefix}is>',
        )
    if value is None:
        return "", formula
    if isinstance(value, bool):
        return ' t="b"', f"{formula}<{prefix}v>{value:d}</{prefix}v>"
    number = float.__repr__(value) if isinstance(value, float) else int.__repr__(value)
    return "", f"{formula}<{prefix}v>{number}</{prefix}v>"


def store_values(xml: bytes, values: Mapping[str, Value]) -> bytes:
    """Return a sheet's XML with values in the given cells; formulas stay.

    A formula whose value is None shows as empty text.
    """
    edits = []
    for cell in find_cells(xml, values):
        value = values[cell.ref]
        shown = "" if value is None and cell.formula is not None else value
        edits.append((cell.start, cell.stop, render_cell(cell, shown, xml)))
    return splice(xml, edits)


def rows_xml(worksheet: Any, rows: Iterable[tuple[int, Sequence[Any]]], stored: Mapping[str, Value]) -> bytes:
    """Return the rows of an openpyxl worksheet: texts, numbers, and formulas with their stored values.

    openpyxl itself writes no value beside a formula, cuts numbers to 16 digits, and takes longer.
    """
    written = []
    for number, cells in rows:
        dimension = "".join(
            f' {name}="{text}"' for name, text in dict(worksheet.row_dimensions.get(number, {})).items()
        )
        written.append(f'<row r="{number}"{dimension}>')
        written += [_cell_xml(cell, stored) for cell in cells]
        written.append("</row>")
    return "".join(written).encode()


def _cell_xml(cell: Any, stored: Mapping[str, Value]) -> str:
    ref, value, formula = cell.coordinate, cell.value, ""
    if cell.data_type == "f":
        attributes = ""
        if isinstance(value, ArrayFormula):
            attributes, value = f' t="array" ref="{value.ref}"', value.text
        formula = f"<f{attributes}>{escape(value[1:])}</f>"
        value = ""
    if cell.hyperlink:
        cell.parent._hyperlinks.append(cell.hyperlink)
    shown = stored.get(ref, value)
    kind, body = _content("" if shown is None and formula else shown, formula)
    return f'<c r="{ref}" s="{cell.style_id}"{kind}>{body}</c>'


def plain_sheet(
    headings: Sequence[str],
    rows: Iterable[Sequence[Value]],
    widths: Sequence[float],
    namespace: str,
    style: int = 0,
) -> bytes:
    """Return a worksheet of texts and numbers that needs nothing of its book but one style.

    Parameters
    ----------
    headings : sequence of str
        First row, in bold type, which stays in sight.
    rows : iterable of sequence
        Cells from the first column on.
    widths : sequence of float
        Of the columns.
    namespace : str
        Main namespace of the book: the strict form of the format has another than the usual one.
    style : int
        Number of the book's style for the rows, which get the heights of texts that it wraps.
    """
    columns = "".join(
        f'<col min="{place}" max="{place}" width="{width}" customWidth="1"/>'
        for place, width in enumerate(widths, 1)
    )
    heads = [(' t="inlineStr"', f"<is><r>{_BOLD}<t>{escape(text)}</t></r></is>") for text in headings]
    written = [_row_xml(1, heads)]
    for number, values in enumerate(rows, 2):
        lines = max(map(_lines, values, widths), default=1)
        cells = [(f' s="{style}"{kind}', body) for kind, body in (_content(value, "") for value in values)]
        written.append(_row_xml(number, cells, f' ht="{lines * _LINE}"' if lines > 1 else ""))
    return (
        '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'
        f"<worksheet xmlns={quoteattr(namespace)}>"
        '<sheetPr><pageSetUpPr fitToPage="1"/></sheetPr>'
        '<sheetViews><sheetView workbookViewId="0">'
        '<pane ySplit="1" topLeftCell="A2" activePane="bottomLeft" state="frozen"/></sheetView></sheetViews>'
        f"<cols>{columns}</cols><sheetData>{''.join(written)}</sheetData>"
        '<pageSetup orientation="landscape" fitToHeight="0"/></worksheet>'
    ).encode()


def _lines(value: Value, width: float) -> int:
    """Return how many lines a value takes; a formula has few blanks, so it breaks anywhere."""
    if not isinstance(value, str):
        return 1
    return max(line_count(value, width, _USUAL_SIZE), math.ceil(text_width(value, _USUAL_SIZE) / width))


def _row_xml(number: int, contents: Iterable[tuple[str, str]], height: str = "") -> str:
    cells = [
        f'<c r="{get_column_letter(place)}{number}"{attributes}>{body}</c>'
        for place, (attributes, body) in enumerate(contents, 1)
    ]
    return f'<row r="{number}"{height}>{"".join(cells)}</row>'


def fill_rows(xml: bytes, rows: bytes) -> bytes:
    """Return a sheet's XML with its empty ``sheetData`` filled."""
    places: list[int] = []

    def note(tag: str, _: object = None) -> None:
        if tag == "sheetData":
            places.append(reader.CurrentByteIndex)

    reader = parser(note, note)
    run(reader, xml)
    start, end = places
    whole = b"<sheetData>" + rows + b"</sheetData>"
    return splice(xml, [(start, end_of("sheetData", xml, end), whole)])


def describe(xml: bytes, texts: Sequence[str]) -> bytes:
    """Return a drawing's XML with alternative texts for its first charts."""
    edits: list[Edit] = []
    remaining = list(texts)

    def start(tag: str, attributes: dict[str, str]) -> None:
        if tag.endswith("cNvPr") and remaining and "descr" not in attributes:
            place = reader.CurrentByteIndex + len(tag) + 1
            edits.append((place, place, f" descr={quoteattr(remaining.pop(0))}".encode()))

    reader = parser(start)
    run(reader, xml)
    return splice(xml, edits)
