"""Zips and XML: fixed bytes, safe reading, and patches that touch nothing else."""

import zipfile

import pytest
from hypothesis import given
from hypothesis import strategies as st
from openpyxl import Workbook, load_workbook

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.house import Book, Live, LiveArray, Put
from steelyard.workbooks.parts import (
    build_date,
    check_package,
    read_parts,
    replacing,
    save,
    write_parts,
)
from steelyard.workbooks.sheetxml import find_cells, render_cell, store_values
from steelyard.workbooks.xmlbytes import splice


def example():
    book = Book("Example")
    sheet = book.sheet("Plan & more")
    sheet.add(Put("claim", "label"), Put(0.02, "input rate"))
    sheet.add(Live("=SY_SIZE(A1)", 0.0178), LiveArray("=SY_POWER(A1,B1:C1)", [[0.1, 0.9]]))
    book.sheet("Second").add(Put("text"))
    return book


def bytes_of(path):
    example().save(path)
    return path.read_bytes()


def test_same_inputs_give_the_same_bytes(tmp_path, monkeypatch):
    first = bytes_of(tmp_path / "a.xlsx")
    assert bytes_of(tmp_path / "b.xlsx") == first
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "1767225600")
    third = bytes_of(tmp_path / "c.xlsx")
    assert third != first
    properties = load_workbook(tmp_path / "c.xlsx").properties
    assert properties.created.isoformat() == properties.modified.isoformat() == "2026-01-01T00:00:00"
    with zipfile.ZipFile(tmp_path / "c.xlsx") as archive:
        assert {entry.date_time for entry in archive.infolist()} == {(1980, 1, 1, 0, 0, 0)}


@pytest.mark.parametrize(("text", "year"), [("", 1980), ("0", 1980), ("1767225600", 2026)])
def test_the_date_of_a_build(text, year, monkeypatch):
    monkeypatch.setenv("SOURCE_DATE_EPOCH", text)
    assert build_date().year == year


def test_a_wrong_date_is_refused(monkeypatch):
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "today")
    with pytest.raises(
        SteelyardError, match="SOURCE_DATE_EPOCH must be a whole number of seconds, but got today"
    ):
        build_date()


@pytest.mark.parametrize("recalculate", [False, True])
def test_stored_values_are_trusted_unless_asked_otherwise(recalculate, tmp_path):
    example().save(tmp_path / "a.xlsx")
    book = example()
    book.save(tmp_path / "a.xlsx", recalculate=recalculate)
    calculation = load_workbook(tmp_path / "a.xlsx").calculation
    assert (calculation.fullCalcOnLoad, calculation.calcId) == (recalculate, 191029)


def test_a_failed_save_leaves_the_old_file_and_no_other(tmp_path):
    path = tmp_path / "book.xlsx"
    path.write_text("old")
    with pytest.raises(RuntimeError), replacing(path) as file:
        file.write(b"half")
        raise RuntimeError
    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_a_place_that_cannot_be_written_is_refused(tmp_path):
    with pytest.raises(SteelyardError, match=r"book.xlsx can't be written: No such file or directory"):
        example().save(tmp_path / "nowhere" / "book.xlsx")
    (tmp_path / "folder").mkdir()
    with pytest.raises(SteelyardError, match=r"folder can't be written: Is a directory"):
        example().save(tmp_path / "folder")
    assert [path.name for path in tmp_path.iterdir()] == ["folder"]


def test_parts_survive_reading_and_writing(tmp_path):
    original, copy = tmp_path / "a.xlsx", tmp_path / "b.xlsx"
    example().save(original)
    parts = read_parts(original)
    write_parts(copy, parts)
    assert list(read_parts(copy).items()) == list(parts.items())
    assert copy.read_bytes() == original.read_bytes()


# Refusals, before anything is unpacked

TYPES = ("[Content_Types].xml", b"<Types/>")


def zip_of(path, *parts):
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, data in parts:
            archive.writestr(name, data)
    return path


@pytest.mark.parametrize(
    ("parts", "message"),
    [
        ([("a.txt", b"")], "is no .xlsx workbook"),
        ([TYPES, ("xl/workbook.bin", b"")], "is no .xlsx workbook"),
        ([TYPES, ("xl/vbaProject.bin", b"")], "holds macros"),
        ([(TYPES[0], b"application/vnd.ms-excel.sheet.macroEnabled.main+xml")], "holds macros"),
        ([TYPES, ("xl/externalLinks/externalLink1.xml", b"")], "links to other workbooks"),
        ([TYPES, ("xl/worksheets/sheet1.xml", b" " * 20_000_000)], r"is too large: 2 parts, 20 MB unpacked"),
    ],
)
def test_what_is_no_plain_workbook_is_refused(parts, message, tmp_path):
    path = zip_of(tmp_path / "list.xlsx", *parts)
    with pytest.raises(SteelyardError, match=f"list.xlsx {message}"):
        check_package(path, 10_000_000, links=False)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1 and more", "is protected with a password or an old .xls file"),
        (b"characteristic,kind", "is no .xlsx workbook"),
        (b"", "is no .xlsx workbook"),
    ],
)
def test_what_is_no_zip_is_refused(content, message, tmp_path):
    (tmp_path / "list.xlsx").write_bytes(content)
    with pytest.raises(SteelyardError, match=f"list.xlsx {message}"):
        check_package(tmp_path / "list.xlsx", 10_000_000)


def test_a_missing_file_is_refused(tmp_path):
    with pytest.raises(SteelyardError, match=r"list.xlsx can't be read \(No such file or directory\)"):
        read_parts(tmp_path / "list.xlsx")


def test_an_encrypted_part_is_refused(tmp_path):
    path = zip_of(tmp_path / "list.xlsx", TYPES)
    data = bytearray(path.read_bytes())
    data[data.index(b"PK\x01\x02") + 8] |= 1  # the flag in the central directory
    path.write_bytes(data)
    with pytest.raises(SteelyardError, match=r"list.xlsx is encrypted"):
        check_package(path, 10_000_000)


def test_the_same_part_twice_is_refused(tmp_path):
    path = zip_of(tmp_path / "list.xlsx", TYPES, ("xl/a.xml", b"1"), ("xl/b.xml", b"2"))
    path.write_bytes(path.read_bytes().replace(b"xl/b.xml", b"xl/a.xml"))
    with pytest.raises(SteelyardError, match=r"list.xlsx is damaged: it holds the same part twice"):
        check_package(path, 10_000_000)


# Cells in the XML

FOREIGN = b"""<?xml version="1.0" encoding="UTF-8" standalone="yes"?>
<!-- kept <c r="A1"><f>no cell</f></c> -->
<x:worksheet xmlns:x="main"><x:sheetData>
 <x:row r="1">
 <x:c s="3" r="A1" cm="1"><x:f t="array" ref="A1:B1" >SIZE(A9,"&lt;&gt;")</x:f><x:v>0.5</x:v></x:c>
 <x:c r="B1"><x:v>0.25</x:v></x:c><x:c r="C1"/>
 <x:c r="D1" t="str"><x:f><![CDATA[A1&"x"]]></x:f><x:v>old</x:v></x:c>
 <x:c r="E1"><x:f t="shared" si="0"/><x:v>7</x:v></x:c>
 <x:c r="F1"><x:f>1</x:f></x:c><x:c r="G1"><x:f/></x:c ></x:row>
</x:sheetData><x:pageMargins left="0.7"/></x:worksheet>"""


def test_formulas_are_found_in_the_xml_of_others():
    cells = {cell.ref: cell for cell in find_cells(FOREIGN)}
    assert {ref: cell.formula for ref, cell in cells.items()} == {
        "A1": 'SIZE(A9,"<>")',
        "D1": 'A1&"x"',
        "E1": "",
        "F1": "1",
        "G1": "",
    }
    assert cells["A1"].formula_attributes == {"t": "array", "ref": "A1:B1"}
    assert cells["E1"].formula_attributes == {"t": "shared", "si": "0"}
    assert [cell.value for cell in cells.values()] == ["0.5", "old", "7", "", ""]
    assert FOREIGN[cells["E1"].start : cells["E1"].stop] == (
        b'<x:c r="E1"><x:f t="shared" si="0"/><x:v>7</x:v></x:c>'
    )


def test_only_the_named_cells_change():
    changed = store_values(FOREIGN, {"A1": 1 / 3, "C1": 4, "D1": "<new>", "E1": None, "F1": 1, "G1": 2})
    expected = FOREIGN
    for old, new in [
        (
            b'ref="A1:B1" >SIZE(A9,"&lt;&gt;")</x:f><x:v>0.5</x:v></x:c>',
            b'ref="A1:B1" >SIZE(A9,"&lt;&gt;")</x:f><x:v>0.3333333333333333</x:v></x:c>',
        ),
        (b'<x:c r="C1"/>', b'<x:c r="C1"><x:v>4</x:v></x:c>'),
        (b"<x:v>old</x:v>", b"<x:v>&lt;new&gt;</x:v>"),
        (
            b'<x:c r="E1"><x:f t="shared" si="0"/><x:v>7</x:v></x:c>',
            b'<x:c r="E1" t="str"><x:f t="shared" si="0"/><x:v></x:v></x:c>',
        ),
        (b"<x:f>1</x:f></x:c>", b"<x:f>1</x:f><x:v>1</x:v></x:c>"),
        (b"<x:f/></x:c >", b"<x:f/><x:v>2</x:v></x:c>"),
    ]:
        assert expected.count(old) == 1
        expected = expected.replace(old, new)
    assert changed == expected


def test_a_formula_can_be_left_out():
    cell = find_cells(FOREIGN, {"D1"})[0]
    assert render_cell(cell, "new ", FOREIGN, formula=False) == (
        b'<x:c r="D1" t="inlineStr"><x:is><x:t xml:space="preserve">new </x:t></x:is></x:c>'
    )


@pytest.mark.parametrize(
    ("xml", "message"),
    [
        (b'<!DOCTYPE w [<!ENTITY a "b">]><worksheet>&a;</worksheet>', "a part declares a document type"),
        ('<?xml version="1.0" encoding="UTF-16"?><worksheet/>'.encode("utf-16"), "must be written in UTF-8"),
        (b'<?xml version="1.0" encoding="latin-1"?><worksheet/>', "must be written in UTF-8, but .* latin-1"),
        (b'<worksheet><c r="A1"></worksheet>', "is damaged: mismatched tag"),
        (b"<worksheet><c/></worksheet>", "leaves out where its cells are"),
        (b"", "is damaged: no element found"),
    ],
)
def test_damaged_or_hostile_xml_is_refused(xml, message):
    with pytest.raises(SteelyardError, match=message):
        find_cells(xml)


NUMBERS = st.floats(allow_nan=False, allow_infinity=False) | st.integers(-(2**53), 2**53)
WORDS = st.text(st.characters(codec="utf-8", exclude_categories=["Cc", "Cs"]), max_size=40)


@given(values=st.dictionaries(st.sampled_from(["A1", "B1", "C2", "XFD9"]), NUMBERS | WORDS, min_size=1))
def test_what_is_stored_is_read_back(values, tmp_path_factory):
    workbook = Workbook()
    for ref in values:
        workbook.active[ref] = "=1+1"
    path = tmp_path_factory.getbasetemp() / "stored.xlsx"
    save(workbook, path, {"Sheet": values})
    sheet = load_workbook(path, data_only=True)["Sheet"]
    assert {ref: sheet[ref].value or "" for ref in values} == {
        ref: value or "" for ref, value in values.items()
    }
    part = read_parts(path)["xl/worksheets/sheet1.xml"]
    assert store_values(part, values) == part


@given(st.binary(max_size=30), st.lists(st.tuples(st.integers(0, 30), st.binary(max_size=3)), max_size=5))
def test_splicing_nothing_away_inserts_everything(data, inserts):
    edits = [(min(at, len(data)), min(at, len(data)), new) for at, new in inserts]
    spliced = splice(data, edits)
    assert len(spliced) == len(data) + sum(len(new) for _, _, new in edits)
    assert splice(data, [(0, len(data), b"all")]) == b"all"
