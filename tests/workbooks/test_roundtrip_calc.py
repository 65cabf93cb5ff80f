"""Books that went through LibreOffice Calc: saved, edited, refreshed, shared, opened without the add-in."""

import math

import pytest
from demo import LIST
from foreign import STALE, foreign_book
from openpyxl import load_workbook
from python_calamine import CalamineWorkbook
from structure import check_structure
from test_formulas_followed import CELLS, FOLLOWED

from steelyard.addin.calc import soffice
from steelyard.workbooks.book import build_book
from steelyard.workbooks.house import Book, Live, LiveArray, Put
from steelyard.workbooks.opened import OpenedBook
from steelyard.workbooks.parts import read_parts, write_parts
from steelyard.workbooks.pieces import Fault
from steelyard.workbooks.plans import plan_requests
from steelyard.workbooks.recalculation import recalculate
from steelyard.workbooks.refresh import refresh_book
from steelyard.workbooks.requests import read_requests
from steelyard.workbooks.share import share_book
from steelyard.workbooks.sheetxml import find_cells, store_values
from steelyard.workbooks.xmlbytes import splice

pytestmark = [
    pytest.mark.calc,
    pytest.mark.slow,
    pytest.mark.filterwarnings("ignore:Sparkline Group extension"),
]


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("roundtrip")


@pytest.fixture(scope="module")
def saved(folder):
    """A plan book of all kinds and sides, opened in Calc with the add-in and saved by it."""
    requests, _ = read_requests(LIST)
    chosen = {request.kind + str(request.side): request for request in requests}
    planned, problems = plan_requests(list(chosen.values()))
    assert not problems
    build_book(planned, folder / "book.xlsx", host="calc", justify=[planned[0].request.characteristic])
    return soffice.recalculate(folder / "book.xlsx", folder / "saved.xlsx")


@pytest.fixture(scope="module")
def edited(folder, saved):
    """The saved book with other inputs, typed without a spreadsheet program."""
    return typed(saved, folder / "edited.xlsx", "Register", {"E7": 0.01, "G8": 0.01, "L9": 77})


@pytest.fixture(scope="module")
def refreshed(folder, edited):
    """The refreshed book, and what the refresh tells."""
    return folder / "refreshed.xlsx", refresh_book(edited, folder / "refreshed.xlsx")


def typed(source, target, title, cells):
    book = OpenedBook(source)
    part = book.sheets[title].part
    book.package.parts[part] = store_values(book.package.parts[part], cells)
    write_parts(target, book.package.parts)
    return target


def shown(path):
    """Return what every cell shows, None where nothing."""
    return {
        (sheet.title, cell.coordinate): None if cell.value == "" else cell.value
        for sheet in load_workbook(path, data_only=True)
        for row in sheet.iter_rows()
        for cell in row
    }


def assert_alike(found, expected, rel=1e-9):
    """Assert that cells show the same; differences of differences may be anything tiny."""
    for place, value in expected.items():
        other = found.get(place)
        if isinstance(value, float | int) and isinstance(other, float | int):
            assert math.isclose(value, other, rel_tol=rel, abs_tol=1e-12), place
        else:
            assert other == value, place


def without(xml, refs):
    return splice(xml, [(cell.start, cell.stop, b"") for cell in find_cells(xml, refs)])


def test_every_formula_of_ours_that_calc_saved_is_followed_and_up_to_date(saved):
    book = OpenedBook(saved)
    found = recalculate(book)
    assert not [str(formula) for formula in found.unfollowed if formula.ours]
    assert found.changed == []
    assert len(found.unchanged) > 150


def test_refresh_gives_what_calc_computes(folder, edited, refreshed):
    """Our own evaluation of the edited book against Calc's with the add-in."""
    path, done = refreshed
    assert done.unfollowed == {}
    assert done.changed > 20
    calculated = shown(soffice.recalculate(edited, folder / "calculated.xlsx"))
    left = {
        (formula.sheet, ref)
        for formula in recalculate(OpenedBook(path)).unfollowed
        for row in formula.places
        for ref in row
    }
    found = {place: value for place, value in shown(path).items() if place not in left}
    assert_alike(found, {place: value for place, value in calculated.items() if place not in left})


def test_refresh_changes_the_named_cells_and_nothing_else(edited, refreshed):
    path, done = refreshed
    before, after = read_parts(edited), read_parts(path)
    check_structure(after)
    sheets, named = OpenedBook(edited).sheets, {}
    for change in done.changes:
        title, _, ref = change.cell.rpartition("!")
        named.setdefault(sheets[title].part, set()).add(ref)
    assert list(after) == list(before)
    assert {part for part in before if before[part] != after[part]} - {"xl/workbook.xml"} == set(named)
    for part, refs in named.items():
        assert without(after[part], refs) == without(before[part], refs)


def test_a_copy_of_a_book_edited_in_calc(folder, refreshed):
    """Untouched parts byte for byte; without an add-in the native checks are recalculated and agree."""
    book, copy = refreshed[0], folder / "copy.xlsx"
    share_book(book, copy)
    before, after = read_parts(book), read_parts(copy)
    check_structure(after)
    for title, sheet in OpenedBook(book).sheets.items():
        ours = {formula.cell.ref for formula in sheet.formulas if formula.ours}
        assert without(after[sheet.part], ours) == without(before[sheet.part], ours), title
        del before[sheet.part]
    assert {part for part in before if before[part] != after[part]} == {
        "[Content_Types].xml",
        "xl/workbook.xml",
        "xl/_rels/workbook.xml.rels",
        "xl/styles.xml",
    }
    calculated = shown(soffice.recalculate(copy, folder / "opened.xlsx", with_addin=False))
    frozen = {formula.place for formula in OpenedBook(book).formulas() if formula.ours}
    assert_alike(calculated, {place: value for place, value in shown(book).items() if place in frozen}, 1e-14)
    register = {ref: value for (title, ref), value in calculated.items() if title == "Register"}
    rows = [
        ref[2:] for ref, value in register.items() if ref.startswith("AC") and ref[2:].isdigit() and value
    ]
    agreeing = [row for row in rows if register[f"AC{row}"] == "agrees"]
    assert len(agreeing) >= 5
    for row in agreeing:
        assert math.isclose(register[f"W{row}"], register[f"AB{row}"], rel_tol=1e-9)
    assert "differs" not in register.values()


def test_a_book_that_calc_saved_without_the_add_in_is_mended(folder):
    """Every formula of ours shows #NAME? there, and what depends on it; the copy shows the numbers."""
    planned, _ = plan_requests(read_requests(LIST)[0][:2])
    build_book(planned, folder / "excel.xlsx", justify=[])
    broken = soffice.recalculate(folder / "excel.xlsx", folder / "broken.xlsx", with_addin=False)
    assert list(shown(broken).values()).count("#NAME?") > 50
    copy = folder / "mended.xlsx"
    assert share_book(broken, copy).recomputed > 50
    calculated = soffice.recalculate(copy, folder / "mended-opened.xlsx", with_addin=False)
    expected = {place: value for place, value in shown(folder / "excel.xlsx").items() if place[1] != "C7"}
    assert_alike(shown(calculated), expected)


def test_three_readers_see_the_same_copy(folder):
    foreign = foreign_book(folder / "foreign.xlsx")
    copy = folder / "foreign-copy.xlsx"
    share_book(foreign, copy)
    by_openpyxl = shown(copy)
    by_calc = shown(soffice.recalculate(copy, folder / "foreign-opened.xlsx", with_addin=False))
    reader = CalamineWorkbook.from_path(str(copy))
    recalculated = ("Plan", "E2")
    assert by_openpyxl.pop(recalculated) == STALE
    assert by_calc[recalculated] == pytest.approx(by_calc["Plan", "B2"], rel=1e-9)
    assert by_calc["Plan", "E3"] is True  # the empty text beside it still is a text
    assert_alike(by_calc, by_openpyxl, 1e-14)
    for title in reader.sheet_names:
        rows = reader.get_sheet_by_name(title).to_python(skip_empty_area=False)
        for row, cells in enumerate(rows, 1):
            for column, value in enumerate(cells, 1):
                ref = f"{'ABCDEFGHIJKLM'[column - 1]}{row}"
                if (title, ref) in by_openpyxl:
                    assert (by_openpyxl[title, ref] if value != "" else None) == (value or None) or value == 0


def test_calc_computes_formulas_as_they_are_followed_here(folder):
    """The same formulas as in test_formulas_followed, by Calc with the add-in."""
    book = Book("Formulas", "calc")
    sheet = book.sheet("Plan")
    inputs = {ref: value for ref, value in CELLS.items() if not isinstance(value, Fault | bool)}
    for row in range(1, 9):
        sheet.add(Put(inputs.get(f"A{row}")), Put(inputs.get(f"B{row}")))
    book.name("Rate", "Plan!$A$2")
    for formula, value in FOLLOWED:
        sheet.add(Live(f"={formula}", value if not isinstance(value, bool) else float(value)), column="D")
    sheet.raw["A4"], sheet.raw["A5"], sheet.raw["B5"] = True, "=NA()", "=1/0"
    book.save(folder / "formulas.xlsx")
    calculated = load_workbook(
        soffice.recalculate(folder / "formulas.xlsx", folder / "formulas-calc.xlsx"), data_only=True
    )["Plan"]
    computed = {formula: calculated[f"D{row}"].value for row, (formula, _) in enumerate(FOLLOWED, 9)}
    for formula, value in FOLLOWED:
        close = isinstance(value, float) and computed[formula] == pytest.approx(value, rel=1e-14, abs=1e-300)
        if close or computed[formula] == value:
            del computed[formula]
    assert computed == {}


def test_array_formulas_that_calc_saved_are_shared(folder):
    book = Book("Arrays", "calc")
    sheet = book.sheet("Plan")
    plan = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"
    sheet.add(Put(plan), Put(0.05), Put(0.1))
    sheet.add(None, LiveArray("=SY_POWER(A1,B1:C1)", [[0.0, 0.0]]))
    book.save(folder / "arrays.xlsx")
    calculated = soffice.recalculate(folder / "arrays.xlsx", folder / "arrays-calc.xlsx")
    share_book(calculated, folder / "arrays-copy.xlsx")
    before, after = shown(calculated), shown(folder / "arrays-copy.xlsx")
    assert before["Plan", "C2"] == pytest.approx(0.749706094046692)
    assert {place: after[place] for place in before} == before
    assert after["Formulas", "C2"] == "{=SY.POWER(A1,B1:C1)}"
