"""Share copies: values in the place of our formulas, everything else kept, and what is refused."""

import hashlib
import re
import zipfile

import pytest
from demo import LIST
from foreign import POWERS, ROW, SIZES, TABLE, content_types, foreign_book, foreign_parts, relations
from openpyxl import Workbook, load_workbook
from python_calamine import CalamineWorkbook
from structure import check_structure

from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError
from steelyard.workbooks.book import build_book
from steelyard.workbooks.cli import main
from steelyard.workbooks.opened import OpenedBook
from steelyard.workbooks.packagexml import Package
from steelyard.workbooks.parts import read_parts, write_parts
from steelyard.workbooks.plans import plan_requests
from steelyard.workbooks.requests import read_requests
from steelyard.workbooks.share import Shared, share_book
from steelyard.workbooks.sheetxml import EVERY, find_cells
from steelyard.workbooks.xmlbytes import splice

pytestmark = pytest.mark.filterwarnings("ignore:Sparkline Group extension")

STYLE = (
    b'<xf numFmtId="0" fontId="0" fillId="0" borderId="0" xfId="0" applyAlignment="1">'
    b'<alignment horizontal="left" vertical="top" wrapText="1"/></xf>'
)


@pytest.fixture(scope="module")
def plan_book(tmp_path_factory):
    """A plan book of our own builder, with all its kinds of sheets."""
    path = tmp_path_factory.mktemp("plan") / "book.xlsx"
    planned, _ = plan_requests(read_requests(LIST)[0][:4])
    build_book(planned, path, justify="all")
    return path


@pytest.fixture(scope="module")
def plan_copy(plan_book):
    copy = plan_book.with_name("copy.xlsx")
    share_book(plan_book, copy)
    return copy


@pytest.fixture
def foreign_copy(tmp_path):
    copy = tmp_path / "copy.xlsx"
    assert share_book(foreign_book(tmp_path / "book.xlsx"), copy) == Shared(10, 4, 0)
    return copy


def without(xml, refs):
    """Return a sheet's bytes without some cells."""
    return splice(xml, [(cell.start, cell.stop, b"") for cell in find_cells(xml, refs)])


def ours_of(book):
    """Return the cells with formulas of ours by the name of their part."""
    return {
        sheet.part: {formula.cell.ref for formula in sheet.formulas if formula.ours}
        for sheet in book.sheets.values()
    }


def assert_only_ours_changed(original, copy):
    """Assert that parts and cells but those with our formulas are the same byte for byte."""
    old, new = read_parts(original), read_parts(copy)
    ours = ours_of(OpenedBook(original))
    for part, data in old.items():
        if ours.get(part):
            assert without(new[part], ours[part]) == without(data, ours[part]), part
        elif part in new and not re.search(r"Content_Types|workbook\.xml|/tables/|styles", part):
            assert new[part] == data, part
    count = int(re.search(rb'<cellXfs count="([0-9]+)"', old["xl/styles.xml"])[1])
    styles = old["xl/styles.xml"].replace(b'cellXfs count="%d"' % count, b'cellXfs count="%d"' % (count + 1))
    assert new["xl/styles.xml"] == styles.replace(b"</cellXfs>", STYLE + b"</cellXfs>")
    return old, new


def shown(path):
    """Return what every cell of a book shows, as openpyxl and as calamine read it."""
    sheets = load_workbook(path, data_only=True)
    by_openpyxl = {
        (sheet.title, cell.row, cell.column): "" if cell.value is None else cell.value
        for sheet in sheets
        for row in sheet.iter_rows()
        for cell in row
    }
    book = CalamineWorkbook.from_path(str(path))
    by_calamine = {
        (title, row, column): value
        for title in book.sheet_names
        for row, cells in enumerate(book.get_sheet_by_name(title).to_python(skip_empty_area=False), 1)
        for column, value in enumerate(cells, 1)
    }
    return by_openpyxl, by_calamine


# Our own plan books


def test_a_copy_holds_together(plan_copy):
    check_structure(read_parts(plan_copy))


def test_only_cells_with_our_formulas_change(plan_book, plan_copy):
    old, new = assert_only_ours_changed(plan_book, plan_copy)
    assert len(new) == len(old) + 2
    changed = {part for part in old if old[part] != new[part]}
    sheets = {part for part, refs in ours_of(OpenedBook(plan_book)).items() if refs}
    registries = {"[Content_Types].xml", "xl/workbook.xml", "xl/_rels/workbook.xml.rels", "xl/styles.xml"}
    assert changed - sheets == registries


def test_readers_see_the_values_of_the_book(plan_book, plan_copy):
    before, after = shown(plan_book)[0], shown(plan_copy)
    for reader in after:
        for place, value in before.items():
            assert reader.get(place, "") == value, place


def test_no_function_of_ours_is_left_and_native_formulas_are(plan_book, plan_copy):
    before, after = OpenedBook(plan_book), OpenedBook(plan_copy)
    assert not [formula for formula in after.formulas() if formula.ours]
    native = {formula.place: formula.text for formula in before.formulas() if not formula.ours}
    kept = {formula.place: formula.text for formula in after.formulas() if formula.text != '""'}
    assert kept == native


def test_formulas_are_listed_with_their_values(plan_book, plan_copy):
    sheet = load_workbook(plan_copy)["Formulas"]
    assert [cell.value for cell in sheet[1]] == ["Sheet", "Cell", "Formula", "Value"]
    rows = {(row[0], row[1]): row[2:] for row in sheet.iter_rows(2, values_only=True)}
    book = OpenedBook(plan_book)
    ours = [formula for formula in book.formulas() if formula.ours]
    assert len(rows) == len(ours)
    for formula in ours:
        text, value = rows[formula.sheet, formula.area]
        assert text.strip("{}") == f"={formula.text}"
        assert ("" if value is None else value) == book.sheets[formula.sheet].values[formula.cell.ref]
    assert all(cell.data_type != "f" for row in sheet.iter_rows() for cell in row)


def test_the_copy_asks_for_a_full_calculation(plan_copy):
    assert load_workbook(plan_copy).calculation.fullCalcOnLoad


def test_provenance_says_from_what_and_by_what(plan_book, plan_copy):
    facts = dict(load_workbook(plan_copy)["Provenance"].iter_rows(2, max_col=2, values_only=True))
    assert facts["Made from the book"] == "book.xlsx"
    assert facts["SHA-256 of that book"] == hashlib.sha256(plan_book.read_bytes()).hexdigest()
    assert facts["Steelyard"] == VERSION
    assert {"Python", "numpy", "scipy"} < set(facts)
    assert re.fullmatch(r"20\d\d-\d\d-\d\d", facts["Date"])
    assert facts["Formulas that became values"] == len(list(load_workbook(plan_copy)["Formulas"].rows)) - 1


def test_same_book_and_date_give_the_same_bytes(plan_book, tmp_path, monkeypatch):
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "1767225600")
    copies = [tmp_path / "a.xlsx", tmp_path / "b.xlsx"]
    for copy in copies:
        share_book(plan_book, copy)
    assert copies[0].read_bytes() == copies[1].read_bytes()
    facts = dict(load_workbook(copies[0])["Provenance"].iter_rows(2, max_col=2, values_only=True))
    assert facts["Date"] == "2026-01-01"


# A book of somebody else's


def test_everything_of_the_users_is_kept(tmp_path, foreign_copy):
    old, new = assert_only_ours_changed(tmp_path / "book.xlsx", foreign_copy)
    check_structure(old)
    check_structure(new)
    assert set(old) - set(new) == {
        "xl/calcChain.xml",
        "xl/externalLinks/externalLink1.xml",
        "xl/externalLinks/_rels/externalLink1.xml.rels",
    }
    assert set(new) - set(old) == {"xl/worksheets/sheet4.xml", "xl/worksheets/sheet5.xml"}
    assert b"calcChain" not in new["[Content_Types].xml"] + new["xl/_rels/workbook.xml.rels"]


def test_shared_array_and_mixed_formulas_become_values(foreign_copy):
    for reader in shown(foreign_copy):
        assert [reader["Plan", row, 2] for row in (2, 3, 4)] == POWERS
        assert [reader["Plan", 2, column] for column in (6, 7, 8)] == ROW
        assert [reader["Plan", row, 11] for row in (2, 3)] == SIZES
        assert [reader["Plan", row, 3] for row in (2, 3, 4)] == ["ok", "", True]
        assert reader["Data's", 1, 4] == "x ≥ 4"


def test_cells_of_dynamic_arrays_lose_their_mark_and_empty_texts_stay_texts(foreign_copy):
    cells = {
        cell.ref: cell for cell in find_cells(read_parts(foreign_copy)["xl/worksheets/first.xml"], EVERY)
    }
    assert cells["F2"].attributes == {"r": "F2"}
    assert (cells["C3"].formula, cells["C3"].value) == ('""', "")
    assert cells["C2"].attributes == {"r": "C2", "s": "1", "t": "inlineStr"}


def test_a_column_of_a_table_forgets_our_formula(foreign_copy):
    table = read_parts(foreign_copy)["xl/tables/table1.xml"].decode()
    formula = re.compile("<calculatedColumnFormula>.*</calculatedColumnFormula>")
    assert table == formula.sub("", TABLE)


def test_texts_of_shared_and_linked_formulas_are_those_of_their_cells(foreign_copy):
    sheet = load_workbook(foreign_copy)["Formulas"]
    texts = {f"{row[0]}!{row[1]}": row[2] for row in sheet.iter_rows(2, values_only=True)}
    assert texts["Plan!B4"] == "=SY_POWER(A4,$B$1)"
    assert texts["Plan!F2:H2"] == "{=SY_POWER(A2,F1:H1)}"
    assert texts["Data's!D1"] == "=sy.region(Plan!A2)"


def test_a_link_that_something_else_uses_stays(tmp_path):
    names = '<definedName name="Other">[1]Rates!$A$1</definedName>'
    share_book(foreign_book(tmp_path / "book.xlsx", names=names), tmp_path / "copy.xlsx")
    parts = read_parts(tmp_path / "copy.xlsx")
    check_structure(parts)
    assert "xl/externalLinks/externalLink1.xml" in parts


def test_a_link_before_another_one_stays_so_that_numbers_stay(tmp_path):
    parts = foreign_parts()
    parts["xl/workbook.xml"] = parts["xl/workbook.xml"].replace(
        b"</externalReferences>", b'<externalReference r:id="rId9"/></externalReferences>'
    )
    parts["xl/_rels/workbook.xml.rels"] = parts["xl/_rels/workbook.xml.rels"].replace(
        b"</Relationships>",
        b'<Relationship Id="rId9" Type="x/externalLink" Target="externalLinks/two.xml"/></Relationships>',
    )
    parts["xl/externalLinks/two.xml"] = parts["xl/externalLinks/externalLink1.xml"]
    write_parts(tmp_path / "book.xlsx", parts)
    share_book(tmp_path / "book.xlsx", tmp_path / "copy.xlsx")
    links = Package(read_parts(tmp_path / "copy.xlsx")).links()
    assert links == ["xl/externalLinks/externalLink1.xml", "xl/externalLinks/two.xml"]


def test_new_sheets_find_free_names_and_the_strict_namespace(tmp_path):
    strict = b"http://purl.oclc.org/ooxml/spreadsheetml/main"
    parts = {
        name: data.replace(b"http://schemas.openxmlformats.org/spreadsheetml/2006/main", strict)
        for name, data in foreign_parts().items()
    }
    parts["xl/workbook.xml"] = parts["xl/workbook.xml"].replace(b"Data's", b"formulas")
    write_parts(tmp_path / "book.xlsx", parts)
    share_book(tmp_path / "book.xlsx", tmp_path / "copy.xlsx")
    package = Package(read_parts(tmp_path / "copy.xlsx"))
    assert list(package.sheets()) == ["Plan", "formulas", "Formulas (2)", "Provenance"]
    assert strict in package.parts["xl/worksheets/sheet4.xml"]


@pytest.mark.parametrize("names", ["", '<definedName name="Rate">Plan!$B$1</definedName>'])
def test_a_book_without_calculation_settings_gets_them_in_their_place(names, tmp_path):
    book = foreign_book(tmp_path / "book.xlsx", names=names, calculation="")
    share_book(book, tmp_path / "copy.xlsx")
    parts = read_parts(tmp_path / "copy.xlsx")
    check_structure(parts)
    assert b'</definedNames><calcPr fullCalcOnLoad="1"/>' in parts["xl/workbook.xml"]


# Values that are missing


def test_values_that_a_program_dropped_are_recomputed(tmp_path):
    """openpyxl drops every stored value; the copy shows them all the same."""
    book = Workbook()
    sheet = book.active
    sheet.append(["binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4", 0.1, "=SY_POWER(A1,B1)"])
    sheet.append([None, "=B1*2", '=IF(SY_POWER(A1,B2)>0.99,"ok","no")', "=C1*2"])
    book.save(tmp_path / "book.xlsx")
    shared = share_book(tmp_path / "book.xlsx", tmp_path / "copy.xlsx")
    assert shared == Shared(frozen=2, live=2, recomputed=4)
    assert str(shared).endswith("4 cells had to be recomputed")
    for reader in shown(tmp_path / "copy.xlsx"):
        assert [reader["Sheet", 1, 3], reader["Sheet", 2, 3]] == [POWERS[0], "ok"]


def test_errors_are_recomputed_and_kept_out(tmp_path):
    parts = foreign_parts()
    follower = f'<c r="G2"><v>{ROW[1]!r}</v></c>'.encode()
    assert follower in parts["xl/worksheets/first.xml"]
    parts["xl/worksheets/first.xml"] = parts["xl/worksheets/first.xml"].replace(
        follower, b'<c r="G2" t="e"><v>#NAME?</v></c>'
    )
    write_parts(tmp_path / "book.xlsx", parts)
    assert share_book(tmp_path / "book.xlsx", tmp_path / "copy.xlsx").recomputed == 1
    assert shown(tmp_path / "copy.xlsx")[0]["Plan", 2, 7] == ROW[1]


def test_a_value_that_nobody_knows_is_refused(tmp_path):
    book = Workbook()
    book.active["A1"] = "=SY_SIZE(VLOOKUP(1,D1:E9,2))"
    book.active["A2"] = "=SY_SIZE(1/0)"
    book.save(tmp_path / "book.xlsx")
    expected = r"book.xlsx can't be shared: no value is known for Sheet!A1 \(uses VLOOKUP\), "
    with pytest.raises(SteelyardError, match=expected + r"Sheet!A2 \(an error value\); recalculate it"):
        share_book(tmp_path / "book.xlsx", tmp_path / "copy.xlsx")
    assert not (tmp_path / "copy.xlsx").exists()


# Refusals


def refusal(tmp_path, parts):
    write_parts(tmp_path / "book.xlsx", parts)
    with pytest.raises(SteelyardError) as refused:
        share_book(tmp_path / "book.xlsx", tmp_path / "copy.xlsx")
    assert not (tmp_path / "copy.xlsx").exists()
    message = str(refused.value)
    assert message.startswith("book.xlsx ")
    assert "\n" not in message
    return message.removeprefix("book.xlsx ")


RULE = (
    '<conditionalFormatting sqref="C2:C4"><cfRule type="expression" priority="2">'
    "<formula>SY_POWER($A2,0.1)&gt;0.5</formula></cfRule></conditionalFormatting>"
)
CHECK = (
    '<dataValidations count="1"><dataValidation type="custom" sqref="A2:A4"><formula1>[1]!SY_CHECK(A2)="ok"'
    "</formula1></dataValidation></dataValidations>"
)
LATER_RULE = (
    '<extLst><ext xmlns:x14="x14" xmlns:xm="xm"><x14:conditionalFormattings><x14:conditionalFormatting>'
    "<x14:cfRule><xm:f>sy.size($A2)&gt;0.05</xm:f></x14:cfRule><xm:sqref>A2</xm:sqref>"
    "</x14:conditionalFormatting></x14:conditionalFormattings></ext></extLst>"
)
TOTAL = TABLE.replace(
    "</calculatedColumnFormula>", "</calculatedColumnFormula><totalsRowFormula>SY_SIZE(A2)</totalsRowFormula>"
)


@pytest.mark.parametrize(
    ("replaced", "obstacle"),
    [
        (
            {"names": '<definedName name="Best">SY_BEST(Plan!$A$2:$A$4,0.1)</definedName>'},
            "the defined name Best calls a function of Steelyard",
        ),
        ({"tail": RULE}, "a conditional format of Plan!C2:C4 calls a function of Steelyard"),
        ({"tail": CHECK}, "a validation of Plan!A2:A4 calls a function of Steelyard"),
        ({"tail": LATER_RULE}, "a conditional format of Plan calls a function of Steelyard"),
        ({"table": TOTAL}, "the total of Size in the table Plans calls a function of Steelyard"),
    ],
)
def test_our_functions_outside_cells_are_refused(replaced, obstacle, tmp_path):
    message = refusal(tmp_path, foreign_parts(**replaced))
    assert message == f"can't be shared: {obstacle}; take that out of the book first"


def test_what_if_tables_are_refused(tmp_path):
    parts = foreign_parts()
    table = b'<f t="dataTable" ref="E4:E6" dt2D="0" dtr="0" r1="B1"/>'
    parts["xl/worksheets/first.xml"] = parts["xl/worksheets/first.xml"].replace(b"<f>B2*2</f>", table)
    assert "Plan!E4:E6 is a what-if data table" in refusal(tmp_path, parts)


def test_the_history_of_a_shared_workbook_is_refused(tmp_path):
    parts = foreign_parts() | {"xl/revisions/revisionHeaders.xml": b"<headers/>"}
    assert "it keeps the history of a shared workbook" in refusal(tmp_path, parts)


def test_signed_books_are_refused(tmp_path):
    parts = foreign_parts() | {"_xmlsignatures/sig1.xml": b"<Signature/>"}
    assert refusal(tmp_path, parts) == "is signed: a changed copy would not be what was signed"


@pytest.mark.parametrize("part", ["xl/vbaProject.bin", "xl/macrosheets/sheet1.xml"])
def test_macros_are_refused(part, tmp_path):
    assert refusal(tmp_path, foreign_parts() | {part: b""}) == "holds macros: save it as .xlsx"


def test_encrypted_books_are_refused(tmp_path):
    (tmp_path / "book.xlsx").write_bytes(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(99))
    with pytest.raises(SteelyardError, match=r"book.xlsx is protected with a password or an old .xls file"):
        share_book(tmp_path / "book.xlsx", tmp_path / "copy.xlsx")


def test_a_book_without_our_functions_needs_no_copy(tmp_path, foreign_copy):
    message = r"copy.xlsx holds no formula with a function of Steelyard: it can be shared as it is"
    with pytest.raises(SteelyardError, match=message):
        share_book(foreign_copy, tmp_path / "again.xlsx")


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("book.xlsx", "must be another file than the book"),
        ("copy.xls", "must be an .xlsx file, but got copy.xls"),
    ],
)
def test_the_copy_is_another_xlsx_file(name, message, tmp_path):
    book = foreign_book(tmp_path / "book.xlsx")
    before = book.read_bytes()
    with pytest.raises(SteelyardError, match=message):
        share_book(book, tmp_path / name)
    assert book.read_bytes() == before


@pytest.mark.parametrize(
    ("part", "damage"),
    [
        ("xl/worksheets/first.xml", None),
        ("xl/workbook.xml", None),
        ("xl/worksheets/first.xml", (b"</sheetData>", b"")),
        ("xl/worksheets/first.xml", (b"<v>0.1</v>", b"<v>one</v>")),
        ("xl/worksheets/first.xml", (b'<c r="A2" s="1" t="s"><v>0</v>', b'<c r="A2" s="1" t="s"><v>9</v>')),
        ("xl/_rels/workbook.xml.rels", (b'Id="rId7"', b'Id="rId70"')),
        ("xl/sharedStrings.xml", (b"<sst", b"<!DOCTYPE sst><sst")),
    ],
)
def test_damaged_books_are_refused(part, damage, tmp_path):
    parts = foreign_parts()
    if damage is None:
        del parts[part]
    else:
        assert damage[0] in parts[part]
        parts[part] = parts[part].replace(*damage)
    message = refusal(tmp_path, parts)
    assert message.startswith("can't be used: ")


def test_an_array_formula_beyond_measure_is_refused(tmp_path):
    parts = foreign_parts()
    sheet = parts["xl/worksheets/first.xml"]
    parts["xl/worksheets/first.xml"] = sheet.replace(b'ref="F2:H2"', b'ref="F2:XFD99999"')
    message = "can't be used: the formula of Plan!F2:XFD99999 fills more than 2,000,000 cells"
    assert refusal(tmp_path, parts) == message


def test_a_call_of_ours_in_a_formula_that_cannot_be_read_is_not_overlooked(tmp_path):
    parts = foreign_parts()
    formula = b"<f>=IF(SY_SIZE(A2)=#SPILL!,1,2)</f>"
    parts["xl/worksheets/first.xml"] = parts["xl/worksheets/first.xml"].replace(b"<f>B2*2</f>", formula)
    write_parts(tmp_path / "book.xlsx", parts)
    assert share_book(tmp_path / "book.xlsx", tmp_path / "copy.xlsx").frozen == 11
    listed = load_workbook(tmp_path / "copy.xlsx")["Formulas"].iter_rows(values_only=True)
    assert "=IF(SY_SIZE(A2)=#SPILL!,1,2)" in [row[2] for row in listed]


def test_a_package_without_a_workbook_is_refused(tmp_path):
    parts = {"[Content_Types].xml": content_types({}).encode(), "_rels/.rels": relations().encode()}
    assert refusal(tmp_path, parts) == "can't be used: the file holds no workbook"


# The command


def test_the_command_writes_the_copy(tmp_path, capsys):
    book, copy = foreign_book(tmp_path / "book.xlsx"), tmp_path / "copy.xlsx"
    assert main(["share", str(book), "-o", str(copy)]) == 0
    out, err = capsys.readouterr()
    assert out == f"{copy}\n"
    assert err == "10 formulas became values, 4 native formulas stay live\n"
    assert zipfile.is_zipfile(copy)


def test_the_command_refuses_in_one_line(tmp_path, capsys):
    book = foreign_book(tmp_path / "book.xlsx", tail=RULE)
    assert main(["share", str(book), "-o", str(tmp_path / "copy.xlsx")]) == 1
    assert capsys.readouterr().err.startswith(
        "steelyard: book.xlsx can't be shared: a conditional format of Plan"
    )
