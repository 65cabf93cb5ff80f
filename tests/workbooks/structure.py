"""Whether the parts of a workbook hold together: what a spreadsheet program checks before it offers a repair.

Rules of ECMA-376 (Office Open XML), parts 1 and 2: relations lead to parts, parts have content types, numbers
that must differ do differ, formulas that share or spread keep to their ranges.
"""

import posixpath
from xml.etree import ElementTree

from openpyxl.utils import range_boundaries
from openpyxl.utils.cell import coordinate_to_tuple

from steelyard.workbooks.sheetxml import EVERY, find_cells


def local(element):
    return element.tag.rpartition("}")[2]


def trees(parts):
    """Return the XML parts, parsed; a part that is not well-formed fails here."""
    ends = (".xml", ".rels", ".vml")
    return {name: ElementTree.fromstring(data) for name, data in parts.items() if name.endswith(ends)}


def relations(parts):
    """Yield for each relation inside the file: the part it starts from, its id, and the part it leads to."""
    for name, tree in trees(parts).items():
        if name.endswith(".rels"):
            folder = posixpath.dirname(posixpath.dirname(name))
            ids = [relation.get("Id") for relation in tree]
            assert len(set(ids)) == len(ids), name
            for relation in tree:
                if relation.get("TargetMode") != "External":
                    target = posixpath.join("/", folder, relation.get("Target"))
                    yield name, relation.get("Id"), posixpath.normpath(target)[1:]


def check_structure(parts):
    """Assert that the parts hold together."""
    check_parts(parts)
    check_workbook(trees(parts)["xl/workbook.xml"])
    for name, data in parts.items():
        if name.startswith("xl/worksheets/") and name.endswith(".xml"):
            check_cells(data)
    check_chain(parts)


def check_parts(parts):
    found = {target for _, _, target in relations(parts)}
    assert found <= set(parts), found - set(parts)
    types = trees(parts)["[Content_Types].xml"]
    overrides = [element.get("PartName")[1:] for element in types if local(element) == "Override"]
    defaults = {element.get("Extension").lower() for element in types if local(element) == "Default"}
    assert len(set(overrides)) == len(overrides)
    assert set(overrides) <= set(parts), set(overrides) - set(parts)
    for name in parts:
        known = name in overrides or name.rpartition(".")[2].lower() in defaults
        assert known or name == "[Content_Types].xml", f"{name} has no content type"
    reachable = found | {name for name in parts if name.endswith(".rels")} | {"[Content_Types].xml"}
    assert set(parts) <= reachable, set(parts) - reachable


def check_workbook(tree):
    sheets = [element for element in tree.iter() if local(element) == "sheet"]
    for key in ("name", "sheetId"):
        values = [sheet.get(key).lower() for sheet in sheets]
        assert len(set(values)) == len(values), values
    assert all(len(sheet.get("name")) <= 31 for sheet in sheets)
    for name in tree.iter():
        if local(name) == "definedName" and name.get("localSheetId"):
            assert int(name.get("localSheetId")) < len(sheets)
    order = (
        "fileVersion workbookPr workbookProtection bookViews sheets externalReferences definedNames calcPr"
    )
    places = {name: place for place, name in enumerate([*order.split(), "pivotCaches", "extLst"])}
    found = [places[local(child)] for child in tree if local(child) in places]
    assert found == sorted(found)


def check_cells(xml):
    cells = find_cells(xml, EVERY)
    refs = [cell.ref for cell in cells]
    assert len(set(refs)) == len(refs)
    assert [coordinate_to_tuple(ref) for ref in refs] == sorted(map(coordinate_to_tuple, refs))
    shared = {}
    spread = set()
    for cell in cells:
        kind, area = cell.formula_attributes.get("t"), cell.formula_attributes.get("ref")
        if kind == "shared" and area:
            assert cell.formula_attributes["si"] not in shared
            shared[cell.formula_attributes["si"]] = range_boundaries(area)
        if kind == "array":
            assert cell.ref == area.partition(":")[0]
            left, top, right, bottom = range_boundaries(area)
            covered = {(row, column) for row in range(top, bottom + 1) for column in range(left, right + 1)}
            assert not covered & spread
            spread |= covered
        if "cm" in cell.attributes:
            assert kind == "array"
    for cell in cells:
        if cell.formula_attributes.get("t") == "shared":
            left, top, right, bottom = shared[cell.formula_attributes["si"]]
            row, column = coordinate_to_tuple(cell.ref)
            assert top <= row <= bottom
            assert left <= column <= right


def check_chain(parts):
    """Assert that a calculation chain names formulas only: with a wrong one Excel offers a repair."""
    if "xl/calcChain.xml" in parts:
        formulas = {
            cell.ref
            for name, data in parts.items()
            if "worksheets/" in name and name.endswith("xml")
            for cell in find_cells(data)
        }
        assert {cell.get("r") for cell in trees(parts)["xl/calcChain.xml"]} <= formulas
