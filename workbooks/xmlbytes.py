"""XML by its bytes: a parser finds the places, and only those bytes change.

Whatever else a part of a workbook holds survives, down to its spaces and the order of its attributes.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from typing import Any
from xml.parsers import expat
from xml.sax.saxutils import quoteattr

from steelyard.core.errors import SteelyardError

Edit = tuple[int, int, bytes]


@dataclass(slots=True)
class Element:
    """An element and the places of its bytes; `text` is all character data within."""

    tag: str
    attributes: dict[str, str]
    start: int
    stop: int = 0
    text: str = ""

    @property
    def name(self) -> str:
        """Name of the element without its prefix."""
        return self.tag.rpartition(":")[2]

    @property
    def prefix(self) -> str:
        """Prefix with its colon, or nothing."""
        return self.tag.removesuffix(self.name)

    def attribute(self, name: str) -> str:
        """Return the attribute of a name, whatever its prefix; empty where there is none."""
        return next((text for key, text in self.attributes.items() if key.rpartition(":")[2] == name), "")


def find_elements(xml: bytes, names: Collection[str]) -> list[Element]:
    """Return the elements of the given names, without prefixes, in the order in which they start.

    Raises
    ------
    SteelyardError
        For XML that is damaged, holds a document type, or is not written in UTF-8.

    Examples
    --------
    >>> [found.text for found in find_elements(b"<a><b>1</b><x:b>2</x:b></a>", {"b"})]
    ['1', '2']
    """
    found: list[Element] = []
    open_elements: list[tuple[Element, int]] = []
    texts: list[str] = []

    def start(tag: str, attributes: dict[str, str]) -> None:
        if tag.rpartition(":")[2] in names:
            element = Element(tag, attributes, reader.CurrentByteIndex)
            found.append(element)
            open_elements.append((element, len(texts)))

    def end(tag: str) -> None:
        if open_elements and open_elements[-1][0].tag == tag:
            element, since = open_elements.pop()
            element.stop = end_of(tag, xml, reader.CurrentByteIndex)
            element.text = "".join(texts[since:])

    reader = parser(start, end)
    reader.CharacterDataHandler = texts.append
    run(reader, xml)
    return found


def start_tag(tag: str, attributes: Mapping[str, str], close: str = "/>") -> bytes:
    """Return the bytes of a start tag, or of an element without content.

    Examples
    --------
    >>> start_tag("calcPr", {"calcId": "191029"})
    b'<calcPr calcId="191029"/>'
    """
    written = "".join(f" {name}={quoteattr(text)}" for name, text in attributes.items())
    return f"<{tag}{written}{close}".encode()


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


def end_of(tag: str, xml: bytes, place: int) -> int:
    """Return where an element ends: expat points at its end tag or, if it has none, behind the element."""
    opening = b"</" + tag.encode()
    has_end_tag = xml.startswith(opening, place) and xml[place + len(opening)] in b"> \t\r\n"
    return xml.index(b">", place) + 1 if has_end_tag else place


def parser(start: Any, end: Any = None) -> expat.XMLParserType:
    """Return a parser with handlers of tags, which refuses document types and other encodings than UTF-8."""
    made = expat.ParserCreate()
    made.buffer_text = True
    made.StartElementHandler, made.EndElementHandler = start, end
    made.StartDoctypeDeclHandler = _no_doctype
    made.XmlDeclHandler = _only_utf8
    return made


def run(reader: expat.XMLParserType, xml: bytes) -> None:
    """Parse a whole part.

    Raises
    ------
    SteelyardError
        For damaged XML.
    """
    try:
        reader.Parse(xml, True)
    except expat.ExpatError as error:
        message = f"the workbook is damaged: {error}"
        raise SteelyardError(message) from None


def _no_doctype(*_: Any) -> None:
    message = "the workbook is damaged: a part declares a document type"
    raise SteelyardError(message)


def _only_utf8(_version: str, encoding: str | None, _standalone: int) -> None:
    if encoding is not None and encoding.lower() not in ("utf-8", "us-ascii"):
        message = f"the workbook must be written in UTF-8, but a part says {encoding}"
        raise SteelyardError(message)
