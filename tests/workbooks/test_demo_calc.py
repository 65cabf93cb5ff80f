"""The demo book in LibreOffice, with the add-in: recalculated, edited, printed."""

import shutil
import subprocess

import pytest
from demo import SHOWN, Stored, build, demo

from steelyard.addin.calc import soffice

pytestmark = [pytest.mark.calc, pytest.mark.slow]

ERRORS = ("#", "Err:", "SY:")


@pytest.fixture(scope="module")
def book(tmp_path_factory):
    return build(tmp_path_factory.mktemp("demo") / "demo.xlsx", host="calc")


@pytest.fixture(scope="module")
def stored(book):
    return Stored(book)


@pytest.fixture(scope="module")
def calculated(book):
    return Stored(soffice.recalculate(book, book.with_name("recalculated.xlsx"), timeout=300)).values


@pytest.fixture(scope="module")
def pages(book):
    """Return the texts of the printed pages."""
    if shutil.which("pdftotext") is None:
        pytest.skip("needs pdftotext")
    pdf = soffice.to_pdf(book, book.parent / "pdf", timeout=300)
    done = subprocess.run(["pdftotext", "-layout", str(pdf), "-"], capture_output=True, check=True)
    return done.stdout.decode("utf-8").split("\f")[:-1]


def shown(value):
    return "" if value is None else value


def test_no_cell_is_an_error_after_recalculation(calculated):
    texts = [(s.title, c.coordinate, c.value) for s in calculated for row in s.iter_rows() for c in row]
    assert [cell for cell in texts if str(cell[2]).startswith(ERRORS) and cell[2] != "#"] == []


def same(found, value):
    """Tell whether a recalculated value is the stored one: numbers to 1e-12, texts exactly."""
    if isinstance(value, float | int) and isinstance(found, float | int):
        return found == pytest.approx(value, rel=1e-12, abs=1e-15)
    return shown(found) == shown(value)


def test_every_value_of_our_functions_is_the_stored_one(stored, calculated):
    ours = [(sheet, cell, value) for sheet, cell, text, value in stored.texts() if "SY." in text]
    assert len(ours) > 400
    assert [one for one in ours if not same(calculated[one[0]][one[1]].value, one[2])] == []


def test_followers_of_array_formulas_are_the_stored_ones(stored, calculated):
    areas = [(sheet, cell.value.ref) for sheet in stored.formulas for row in sheet.iter_rows() for cell in row
             if hasattr(cell.value, "ref")]  # fmt: skip
    differing = []
    for sheet, area in areas:
        for line in stored.values[sheet.title][area]:
            for cell in line:
                if not same(calculated[sheet.title][cell.coordinate].value, cell.value):
                    differing.append((sheet.title, cell.coordinate))
    assert len(areas) > len(demo())
    assert differing == []


def test_every_native_check_agrees_after_recalculation(stored, calculated):
    assert calculated["Checks"]["C3"].value == f"{len(demo())} of {len(demo())} plans agree"
    register = [cell.value for row in calculated["Register"].iter_rows(min_row=7) for cell in row]
    assert register.count("agrees") == len(demo())
    largest = max(row[-2].value for row in calculated["Checks"].iter_rows(min_row=8))
    assert largest <= 1e-9


def test_edited_inputs_reach_the_plan(tmp_path, stored, book):
    """A fixed size taken away: the smallest plan is found in the cell."""
    workbook = stored.formulas
    register = workbook["Register"]
    row = next(cell.row for cell in register["B"] if cell.value == "Flash on the barb")
    register.cell(row, 12).value = None
    workbook.save(tmp_path / "edited.xlsx")
    done = Stored(soffice.recalculate(tmp_path / "edited.xlsx", tmp_path / "done.xlsx", timeout=300))
    first = Stored(book).register("Blocked emitter", "Plan")  # the same claim and rate to catch
    assert done.register("Flash on the barb", "Plan") == first
    assert done.register("Flash on the barb", "Native check") == "agrees"
    assert done.register("Flash on the barb", "Shortfall of power") in ("", None)


def test_printed_pages_are_whole(pages):
    text = "\n".join(pages)
    assert "###" not in text
    assert not [error for error in ("#NAME?", "#VALUE!", "#N/A", "Err:") if error in text]
    assert all(page.strip() for page in pages)


def test_each_justification_takes_two_pages(pages):
    for name in SHOWN:
        number = next(planned.number for planned in demo() if planned.request.characteristic == name)
        headed = [page for page in pages if f"{number} {name}" in page.split("\n")[0]]
        assert len(headed) == 2
        assert "Justification of a sampling plan" in headed[0]
        assert "4 What the plan does" in " ".join(headed[0].split())
        assert "5 Check by the spreadsheet's own functions" in " ".join(headed[1].split())
        assert "Approver" in headed[1]


def test_the_register_prints_on_two_pages_side_by_side(pages):
    headed = [page for page in pages if page.split("\n")[0].rstrip().endswith("Register")]
    assert len(headed) == 2
    assert all("Left-hand coils in the lot" in page for page in headed)
    assert "Main requirement of the field" in headed[0]
    assert "Remark on the plan" in headed[1]
    assert "no low count can reject" in headed[1]
