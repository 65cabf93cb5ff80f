"""The XML inside workbooks: finding cells and patching them, and nothing else of their bytes.

The only module that touches XML. A parser finds the places, and only those bytes change, so that whatever
else a part holds survives.
"""

from __future__ import annotations

from collections.abc import Container, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any
from xml.parsers import expat
from xml.sax.saxutils import escape, quoteattr

from openpyxl.worksheet.formula import ArrayFormula

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.pieces import Value

Edit = tuple[int, int, bytes]


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
        For XML that is damaged, holds a document type, or is not written in UTF-8.
    """
    found: list[CellXml] = []
    cell: CellXml | None = None
    texts: list[str] = []
    prefix = ""

    def start(tag: str, attributes: dict[str, str]) -> None:
        nonlocal cell, prefix
        if tag == prefix + "c":
            ref = attributes.get("r", "")
            if wanted is None or ref in wanted:
                cell = CellXml(ref, attributes, parser.CurrentByteIndex, prefix=prefix)
        elif cell is not None:
            if tag == prefix + "f":
                cell.formula_attributes, cell.formula_place = attributes, (parser.CurrentByteIndex, 0)
            texts.clear()
            parser.CharacterDataHandler = texts.append
        elif tag.endswith("worksheet"):
            prefix = tag.removesuffix("worksheet")

    def end(tag: str) -> None:
        nonlocal cell
        if cell is None:
            return
        if tag == prefix + "f":
            cell.formula = "".join(texts)
            cell.formula_place = (cell.formula_place[0], _end(tag, xml, parser.CurrentByteIndex))
        elif tag in (prefix + "v", prefix + "t"):
            cell.value += "".join(texts)
        elif tag == prefix + "c":
            cell.stop = _end(tag, xml, parser.CurrentByteIndex)
            if wanted is not None or cell.formula is not None:
                found.append(cell)
            cell, parser.CharacterDataHandler = None, None

    parser = _parser(start, end)
    _run(parser, xml)
    return found


def render_cell(cell: CellXml, value: Value, xml: bytes, formula: bool = True) -> bytes:
    """Return a cell's XML with another value, with or without its formula."""
    kept = xml[slice(*cell.formula_place)].decode() if formula and cell.formula is not None else ""
    kind, body = _content(value, kept, cell.prefix)
    attributes = {name: text for name, text in cell.attributes.items() if name != "t"}
    written = "".join(f" {name}={quoteattr(text)}" for name, text in attributes.items())
    return f"<{cell.prefix}c{written}{kind}>{body}</{cell.prefix}c>".encode()


def _content(value: Value, formula: str, prefix: str = "") -> tuple[str, str]:
    """Return the type attribute and the inner XML of a cell.

    Numbers are written with the shortest text that reads back to the same number (up to 17 digits).
    """
    if isinstance(value, str):
        text = escape(value)
        if formula:
            return ' t="str"', f"{formula}<{prefix}v>{text}</{prefix}v>"
        return (
            ' t="inlineStr"',
            f'<{prefix}is><{prefix}t xml:space="preserve">{text}</{prefix}t></{prefix}is>',
        )
    if value is None:
        return "", formula
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


def fill_rows(xml: bytes, rows: bytes) -> bytes:
    """Return a sheet's XML with its empty ``sheetData`` filled."""
    places: list[int] = []

    def note(tag: str, _: object = None) -> None:
        if tag == "sheetData":
            places.append(parser.CurrentByteIndex)

    parser = _parser(note, note)
    _run(parser, xml)
    start, end = places
    whole = b"<sheetData>" + rows + b"</sheetData>"
    return splice(xml, [(start, _end("sheetData", xml, end), whole)])


def describe(xml: bytes, texts: Sequence[str]) -> bytes:
    """Return a drawing's XML with alternative texts for its first charts."""
    edits: list[Edit] = []
    remaining = list(texts)

    def start(tag: str, attributes: dict[str, str]) -> None:
        if tag.endswith("cNvPr") and remaining and "descr" not in attributes:
            place = parser.CurrentByteIndex + len(tag) + 1
            edits.append((place, place, f" descr={quoteattr(remaining.pop(0))}".encode()))

    parser = _parser(start)
    _run(parser, xml)
    return splice(xml, edits)


def splice(data: bytes, edits: Iterable[Edit]) -> bytes:
    """Return bytes with the given places replaced; all others are kept.

    Examples
    --------
    >>> splice(b"power 0.9", [(6, 9, b"0.95")])
    b'power 0.95'
    """
    chunks, done = [], 0
    for start, stop, new in sorted(edits):
        chunks += [data[done:start], new]
        done = stop
    return b"".join([*chunks, data[done:]])


def sheet_parts(parts: Mapping[str, bytes]) -> dict[str, str]:
    """Return sheet titles and the names of their parts, in the order of the tabs."""
    targets: dict[str, str] = {}
    sheets: dict[str, str] = {}

    def relation(tag: str, attributes: dict[str, str]) -> None:
        if tag.endswith("Relationship"):
            target = attributes["Target"]
            targets[attributes["Id"]] = target[1:] if target.startswith("/") else f"xl/{target}"

    def sheet(tag: str, attributes: dict[str, str]) -> None:
        if tag.rpartition(":")[2] == "sheet":
            key = next(value for name, value in attributes.items() if name.endswith(":id"))
            sheets[attributes["name"]] = key

    _run(_parser(relation), parts["xl/_rels/workbook.xml.rels"])
    _run(_parser(sheet), parts["xl/workbook.xml"])
    return {title: targets[key] for title, key in sheets.items()}


def _end(tag: str, xml: bytes, place: int) -> int:
    """Return where an element ends: expat points at its end tag or, if it has none, behind the element."""
    return xml.index(b">", place) + 1 if xml.startswith(b"</" + tag.encode(), place) else place


def _parser(start: Any, end: Any = None) -> expat.XMLParserType:
    parser = expat.ParserCreate()
    parser.buffer_text = True
    parser.StartElementHandler, parser.EndElementHandler = start, end
    parser.StartDoctypeDeclHandler = _no_doctype
    parser.XmlDeclHandler = _only_utf8
    return parser


def _no_doctype(*_: Any) -> None:
    message = "the workbook is damaged: a part declares a document type"
    raise SteelyardError(message)


def _only_utf8(_version: str, encoding: str | None, _standalone: int) -> None:
    if encoding is not None and encoding.lower() not in ("utf-8", "us-ascii"):
        message = f"the workbook must be written in UTF-8, but a part says {encoding}"
        raise SteelyardError(message)


def _run(parser: expat.XMLParserType, xml: bytes) -> None:
    try:
        parser.Parse(xml, True)
    except expat.ExpatError as error:
        message = f"the workbook is damaged: {error}"
        raise SteelyardError(message) from None
