"""The XML that holds a workbook together: relations, content types, the list of sheets, names, links."""

from __future__ import annotations

import itertools
import posixpath
from dataclasses import dataclass

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.xmlbytes import Element, find_elements, splice, start_tag

_TYPES = "[Content_Types].xml"
_SHEET_TYPE = "application/vnd.openxmlformats-officedocument.spreadsheetml.worksheet+xml"
_PLAIN_STYLE = dict.fromkeys(("numFmtId", "fontId", "fillId", "borderId", "xfId"), "0")
_WRAPPING = {"horizontal": "left", "vertical": "top", "wrapText": "1"}
_BEFORE_CALCULATION = {"sheets", "functionGroups", "externalReferences", "definedNames"}
_LONGEST_TITLE = 31


@dataclass(frozen=True, slots=True)
class Relation:
    """What a part refers to: the last word of the relation's type, and the name of the part it leads to."""

    id: str
    kind: str
    part: str
    element: Element


@dataclass(frozen=True, slots=True)
class DefinedName:
    """A defined name: its text without ``=``, and the sheet that alone knows it, if any."""

    name: str
    text: str
    sheet: str = ""


class Package:
    """The parts of a workbook, and the changes that keep them consistent.

    Parameters
    ----------
    parts : dict
        Names -> bytes; changed in place.

    Raises
    ------
    SteelyardError
        When the parts hold no workbook.
    """

    def __init__(self, parts: dict[str, bytes]) -> None:
        self.parts = parts
        main = [relation.part for relation in self.relations("") if relation.kind == "officeDocument"]
        if not main or main[0] not in parts:
            message = "the file holds no workbook"
            raise SteelyardError(message)
        self.workbook = main[0]

    def relations(self, part: str) -> list[Relation]:
        """Return what a part refers to inside the file; of the whole file if the name is empty."""
        folder = posixpath.dirname(part)
        return [
            Relation(
                element.attributes["Id"],
                element.attributes["Type"].rpartition("/")[2],
                posixpath.normpath(posixpath.join("/", folder, element.attributes["Target"]))[1:],
                element,
            )
            for element in find_elements(self.parts.get(_relations_of(part), b"<none/>"), {"Relationship"})
            if element.attributes.get("TargetMode") != "External"
        ]

    def sheets(self) -> dict[str, str]:
        """Return sheet titles and the names of their parts, in the order of the tabs."""
        targets = {relation.id: relation.part for relation in self.relations(self.workbook)}
        return {sheet.attributes["name"]: targets[sheet.attribute("id")] for sheet in self._elements("sheet")}

    def names(self) -> list[DefinedName]:
        """Return the defined names."""
        titles = [sheet.attributes["name"] for sheet in self._elements("sheet")]
        return [
            DefinedName(
                element.attributes["name"],
                element.text,
                titles[int(element.attributes["localSheetId"])]
                if "localSheetId" in element.attributes
                else "",
            )
            for element in self._elements("definedName")
        ]

    def strings(self) -> list[str]:
        """Return the shared strings, without the readings of East Asian words."""
        found: list[str] = []
        for relation in self.relations(self.workbook):
            if relation.kind == "sharedStrings":
                elements = find_elements(self.parts[relation.part], {"si", "t", "rPh"})
                found += _shared_strings(elements)
        return found

    def free_title(self, wanted: str) -> str:
        """Return a sheet title, with a number where it is taken."""
        taken = {sheet.attributes["name"].lower() for sheet in self._elements("sheet")}
        tails = itertools.chain([""], (f" ({number})" for number in itertools.count(2)))
        titles = (wanted[: _LONGEST_TITLE - len(tail)] + tail for tail in tails)
        return next(title for title in titles if title.lower() not in taken)

    def namespace(self) -> str:
        """Return the main namespace, which differs between the usual and the strict form of the format."""
        root = self._elements("workbook")[0]
        return root.attributes[f"xmlns:{root.prefix[:-1]}" if root.prefix else "xmlns"]

    def add_sheet(self, title: str, xml: bytes) -> None:
        """Add a worksheet behind the others."""
        numbers = itertools.count(len(self.sheets()) + 1)
        part = next(
            name
            for name in (f"{posixpath.dirname(self.workbook)}/worksheets/sheet{n}.xml" for n in numbers)
            if name not in self.parts
        )
        self.parts[part] = xml
        kind = next(relation for relation in self.relations(self.workbook) if relation.kind == "worksheet")
        known = {relation.id for relation in self.relations(self.workbook)}
        key = next(key for key in (f"rId{n}" for n in itertools.count(1)) if key not in known)
        target = posixpath.relpath(part, posixpath.dirname(self.workbook))
        attributes = {"Id": key, "Type": kind.element.attributes["Type"], "Target": target}
        self._append(_relations_of(self.workbook), "Relationship", attributes)
        self._append(_TYPES, "Override", {"PartName": f"/{part}", "ContentType": _SHEET_TYPE})
        sheets = self._elements("sheet")
        reference = next(name for name in sheets[0].attributes if name.rpartition(":")[2] == "id")
        number = 1 + max(int(sheet.attributes["sheetId"]) for sheet in sheets)
        self._append(self.workbook, "sheet", {"name": title, "sheetId": str(number), reference: key})

    def add_wrapping_style(self) -> int:
        """Add a style of the first font for long texts; return its number, 0 if the book has no styles."""
        for relation in self.relations(self.workbook):
            if relation.kind == "styles":
                return self._add_style(relation.part)
        return 0

    def _add_style(self, part: str) -> int:
        xml = self.parts[part]
        group = find_elements(xml, {"cellXfs"})[0]
        known = [xf for xf in find_elements(xml, {"xf"}) if group.start < xf.start < group.stop]
        opening = start_tag(group.tag, group.attributes | {"count": str(len(known) + 1)}, ">")
        xf = start_tag(f"{group.prefix}xf", _PLAIN_STYLE | {"applyAlignment": "1"}, ">")
        alignment = start_tag(f"{group.prefix}alignment", _WRAPPING)
        new = xf + alignment + f"</{group.prefix}xf>".encode()
        edits = [
            (group.start, xml.index(b">", group.start) + 1, opening),
            (known[-1].stop, known[-1].stop, new),
        ]
        self.parts[part] = splice(xml, edits)
        return len(known)

    def drop(self, kind: str) -> None:
        """Remove the parts to which the workbook has relations of a kind."""
        while found := [relation for relation in self.relations(self.workbook) if relation.kind == kind]:
            self._drop(found[0])

    def links(self) -> list[str]:
        """Return the names of the parts that describe links to other workbooks; ``[1]`` is the first."""
        targets = {relation.id: relation.part for relation in self.relations(self.workbook)}
        return [targets.get(link.attribute("id"), "") for link in self._elements("externalReference")]

    def drop_last_link(self) -> None:
        """Remove the last link to another workbook; the numbers of the others stay."""
        links = self._elements("externalReference")
        key = links[-1].attribute("id")
        last = links[-1] if len(links) > 1 else self._elements("externalReferences")[0]
        self._remove(self.workbook, last)
        self._drop(next(relation for relation in self.relations(self.workbook) if relation.id == key))

    def recalculate_on_opening(self) -> None:
        """Let the reader's program compute all formulas when it opens the book."""
        xml = self.parts[self.workbook]
        elements = find_elements(xml, _BEFORE_CALCULATION | {"calcPr"})
        present = [element for element in elements if element.name == "calcPr"]
        last = max((element for element in elements if element not in present), key=lambda e: e.stop)
        place = (present[0].start, present[0].stop) if present else (last.stop, last.stop)
        attributes = present[0].attributes if present else {}
        tag = start_tag(f"{last.prefix}calcPr", attributes | {"fullCalcOnLoad": "1"})
        self.parts[self.workbook] = splice(xml, [(*place, tag)])

    def _elements(self, name: str) -> list[Element]:
        return find_elements(self.parts[self.workbook], {name})

    def _append(self, part: str, name: str, attributes: dict[str, str]) -> None:
        """Write an element behind the last one of its name."""
        last = find_elements(self.parts[part], {name})[-1]
        edit = (last.stop, last.stop, start_tag(last.tag, attributes))
        self.parts[part] = splice(self.parts[part], [edit])

    def _remove(self, part: str, element: Element) -> None:
        self.parts[part] = splice(self.parts[part], [(element.start, element.stop, b"")])

    def _drop(self, relation: Relation) -> None:
        self._remove(_relations_of(self.workbook), relation.element)
        self.parts.pop(relation.part, None)
        self.parts.pop(_relations_of(relation.part), None)
        for element in find_elements(self.parts[_TYPES], {"Override"}):
            if element.attributes["PartName"] == f"/{relation.part}":
                self._remove(_TYPES, element)
                break


def _relations_of(part: str) -> str:
    folder, name = posixpath.split(part)
    return posixpath.join(folder, "_rels", f"{name}.rels")


def _shared_strings(elements: list[Element]) -> list[str]:
    """Return the texts of string items, from these, their runs and the readings among them."""
    found: list[str] = []
    silent = 0
    for element in elements:
        if element.name == "si":
            found.append("")
        elif element.name == "rPh":
            silent = element.stop
        elif element.start >= silent:
            found[-1] += element.text
    return found
