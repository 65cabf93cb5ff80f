"""Steelyard's functions typed into the cells of a running LibreOffice Calc."""

from __future__ import annotations

import os
import shlex
import subprocess
from collections.abc import Iterator
from pathlib import Path

import openpyxl
import pytest
from office import Office
from openpyxl.worksheet.formula import ArrayFormula

from steelyard.addin import CATALOGUE, call
from steelyard.addin.calc import connect, soffice
from steelyard.addin.calc.connect import connect_calc, disconnect_calc
from steelyard.core import VERSION
from steelyard.core.errors import SteelyardError

pytestmark = pytest.mark.calc

PLAN = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"
OTHER = "binomial | n 80 | claim p<=0.02 | alpha 0.05 | reject x>=5"
CALC_XLSX = "Calc MS Excel 2007 XML"
AS_NOBODY = ["unshare", "-U"] if hasattr(os, "geteuid") and os.geteuid() == 0 else []
"""LibreOffice installs nothing for root; this makes root a nobody."""


@pytest.fixture(scope="module")
def office() -> Iterator[Office]:
    with Office() as running:
        yield running


@pytest.fixture
def sheet(office: Office) -> Iterator[int]:
    """Return a new document with two plans in A1:A2 and rates, one of them missing, in B1:D1."""
    document = office.open()
    office.put(document, "A1:D1", [[PLAN, 0.02, 0.05, ""]])
    office.put(document, "A2", [[OTHER]])
    yield document
    office.close(document)


def test_a_function_is_typed_with_a_dot(office: Office, sheet: int) -> None:
    office.typed(sheet, "F1", "=SY.POWER(A1;5%)")
    assert office.formula(sheet, "F1") == "=SY.POWER(A1;5%)"
    assert office.value(sheet, "F1") == call("SY_POWER", [PLAN, 0.05])


@pytest.mark.parametrize("rate", ["2%", "5%", "10%", "0.3"])
def test_power_agrees_with_calc_itself(office: Office, sheet: int, rate: str) -> None:
    """Calc's own BINOM.DIST, upper tail by the swapped side, stands as the independent reference."""
    native = office.compute(sheet, f"=BINOM.DIST(46;50;1-{rate};TRUE())")
    assert office.compute(sheet, f"=SY.POWER(A1;{rate})") == pytest.approx(native, rel=1e-12)


def test_a_plan_is_made_in_a_cell_and_asked_from_another(office: Office, sheet: int) -> None:
    office.put(sheet, "F1:G1", [["=SY.BINOMIAL(50;2%)", "=SY.POWER(F1;5%)"]])
    assert office.get(sheet, "F1:G1") == [[PLAN, call("SY_POWER", [PLAN, 0.05])]]


def test_omitted_arguments_take_their_defaults(office: Office, sheet: int) -> None:
    assert office.compute(sheet, '=SY.BINOMIAL(50;2%;;"above")') == PLAN
    assert office.compute(sheet, "=SY.BINOMIAL(50;2%;)") == PLAN
    assert office.compute(sheet, "=SY.VERSION()") == VERSION


def test_ranges_broadcast_in_an_array_formula(office: Office, sheet: int) -> None:
    office.array(sheet, "F1:H2", "=SY.POWER(A1:A2;B1:D1)")
    expected = [[call("SY_POWER", [plan, rate]) for rate in (0.02, 0.05)] + [""] for plan in (PLAN, OTHER)]
    assert office.get(sheet, "F1:H2") == expected


def test_a_single_plan_runs_along_a_row_of_rates(office: Office, sheet: int) -> None:
    office.array(sheet, "F1:G1", "=SY.POWER(A1;B1:C1)")
    assert office.get(sheet, "F1:G1") == [[call("SY_POWER", [PLAN, 0.02]), call("SY_POWER", [PLAN, 0.05])]]


def test_texts_and_numbers_mix_in_a_result(office: Office, sheet: int) -> None:
    office.put(sheet, "D1", [["many"]])
    office.array(sheet, "F1:H1", "=SY.POWER(A1;B1:D1)")
    power, _, refusal = office.get(sheet, "F1:H1")[0]
    assert power == call("SY_POWER", [PLAN, 0.02])
    assert refusal == call("SY_POWER", [PLAN, "many"])


ZERO_OR_EMPTY = "is 0 or an empty cell, which Calc does not tell apart: write E5:E5 instead of E5"


def test_an_empty_cell_is_never_read_as_zero(office: Office, sheet: int) -> None:
    assert f"SY: rate {ZERO_OR_EMPTY}" in office.compute(sheet, "=SY.POWER(A1;D1)")
    assert f"SY: plan {ZERO_OR_EMPTY}" in office.compute(sheet, "=SY.POWER(A9;5%)")
    assert office.compute(sheet, "=SY.POWER(A1)") == call("SY_POWER", [PLAN, None])


def test_a_range_of_one_cell_tells_empty_from_zero(office: Office, sheet: int) -> None:
    empty = office.compute(sheet, "=SY.DECIDE(A1;D1:D1)")
    assert empty == call("SY_DECIDE", [PLAN, None])
    assert empty.startswith("SY: observed must be given")
    office.put(sheet, "D1", [[0]])
    assert office.compute(sheet, "=SY.DECIDE(A1;D1:D1)") == call("SY_DECIDE", [PLAN, 0])
    assert office.compute(sheet, "=SY.POWER(A1;{0})") == call("SY_POWER", [PLAN, 0])


def test_refusals_are_texts_and_travel_on(office: Office, sheet: int) -> None:
    refusal = office.compute(sheet, "=SY.BINOMIAL(50;2%;5)", "F1")
    assert refusal == call("SY_BINOMIAL", [50, 0.02, 5])
    assert refusal.startswith("SY: ")
    assert office.compute(sheet, "=SY.POWER(F1;5%)") == refusal


def test_an_error_value_passes_through(office: Office, sheet: int) -> None:
    assert office.compute(sheet, "=SY.POWER(A1;1/0)") == "#DIV/0!"


def test_a_full_column_is_refused_in_words(office: Office, sheet: int) -> None:
    refusal = office.compute(sheet, "=SY.POWER(A1;C:C)")
    assert refusal.startswith(
        "SY: rate must be a range of at most 100000 cells, but got 1048576: name the rows"
    )


def test_twenty_thousand_cells_in_one_formula(office: Office, sheet: int) -> None:
    rates = [[(row + 1) / 20_001] for row in range(20_000)]
    office.put(sheet, "J1:J20000", rates)
    office.array(sheet, "K1:K20000", "=SY.POWER(A1;J1:J20000)")
    assert office.get(sheet, "K1:K20000") == call("SY_POWER", [PLAN, rates])


def test_the_function_wizard_shows_the_catalogue(office: Office) -> None:
    shown = office.functions()
    assert shown == {
        entry.calc_name: [entry.help, [[a.name, a.help, True] for a in entry.arguments]]
        for entry in CATALOGUE.values()
    }


def test_two_documents_compute_at_once(office: Office, sheet: int) -> None:
    other = office.open()
    office.put(other, "A1", [[OTHER]])
    for document in (sheet, other):
        office.put(document, "F1:F50", [[f"=SY.POWER($A$1;{row}/100)"] for row in range(1, 51)])
    for document, plan in ((sheet, PLAN), (other, OTHER)):
        office.recalculate(document)
        expected = [[call("SY_POWER", [plan, row / 100])] for row in range(1, 51)]
        assert office.get(document, "F1:F50") == expected
    office.close(other)


def test_saving_calculates_what_is_not_yet_calculated(office: Office, sheet: int, tmp_path: Path) -> None:
    office.put(sheet, "F1:F200", [[f"=SY.POWER(A$1;{row}/1000)"] for row in range(1, 201)])
    office.save(sheet, str(tmp_path / "saved.xlsx"), CALC_XLSX)
    saved = openpyxl.load_workbook(tmp_path / "saved.xlsx", data_only=True).worksheets[0]
    for row in range(1, 201):
        assert saved.cell(row, 6).value == pytest.approx(call("SY_POWER", [PLAN, row / 1000]), rel=1e-14)


@pytest.fixture
def book(tmp_path: Path) -> Path:
    """Return a workbook written by openpyxl: a scalar and an array formula, with wrong values beside them."""
    workbook = openpyxl.Workbook()
    page = workbook.worksheets[0]
    for column, value in zip("ABCD", [PLAN, 0.02, 0.05, 0.1], strict=True):
        page[f"{column}1"] = value
    page["F1"] = "=SY.POWER(A1,C1)"
    page["G1"] = ArrayFormula("G1:I1", "=SY.POWER(A1,B1:D1)")
    workbook.save(tmp_path / "book.xlsx")
    return tmp_path / "book.xlsx"


def test_a_workbook_of_ours_loads_computes_and_saves(book: Path, tmp_path: Path) -> None:
    saved = soffice.recalculate(book, tmp_path / "saved.xlsx")
    values = openpyxl.load_workbook(saved, data_only=True).worksheets[0]
    expected = [call("SY_POWER", [PLAN, rate]) for rate in (0.05, 0.02, 0.05, 0.1)]
    assert [values.cell(1, column).value for column in range(6, 10)] == pytest.approx(expected, rel=1e-14)
    formulas = openpyxl.load_workbook(saved).worksheets[0]
    assert formulas["F1"].value == "=SY.POWER(A1,C1)"
    assert formulas["G1"].value.text == "=SY.POWER(A1,B1:D1)"


def test_without_the_add_in_the_names_are_unknown(book: Path, tmp_path: Path) -> None:
    saved = soffice.recalculate(book, tmp_path / "saved.xlsx", with_addin=False)
    assert openpyxl.load_workbook(saved, data_only=True).worksheets[0]["F1"].value == "#NAME?"


def test_a_workbook_is_printed(book: Path, tmp_path: Path) -> None:
    assert soffice.to_pdf(book, tmp_path).read_bytes().startswith(b"%PDF")


def test_an_unreadable_file_is_reported(tmp_path: Path) -> None:
    with pytest.raises(SteelyardError, match=r"LibreOffice did not turn .*gone\.xlsx into a \.ods file"):
        soffice.recalculate(tmp_path / "gone.xlsx", tmp_path / "saved.ods")


def test_underscore_names_wait_for_a_newer_calc(office: Office, sheet: int, tmp_path: Path) -> None:
    """Excel's spelling in an .xlsx is unknown to Calc 7.4; a newer one may map it, and then must compute."""
    workbook = openpyxl.Workbook()
    workbook.worksheets[0]["A1"] = f'=SY_POWER("{PLAN}",5%)'
    workbook.save(tmp_path / "excel.xlsx")
    document = office.open(str(tmp_path / "excel.xlsx"))
    assert office.value(document, "A1") in ("#NAME?", call("SY_POWER", [PLAN, 0.05]))
    office.close(document)


@pytest.fixture
def private_profile(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Make LibreOffice's tool work in a profile of the test."""
    tool = tmp_path / "unopkg"
    profile = (tmp_path / "profile").as_uri()
    real = [*AS_NOBODY, str(soffice.find_tool("unopkg"))]
    tool.write_text(f'#!/bin/sh\nexec {shlex.join(real)} "$@" "-env:UserInstallation={profile}"\n')
    tool.chmod(0o755)
    monkeypatch.setattr(connect, "find_tool", lambda name: tool)
    return tmp_path / "profile"


@pytest.mark.skipif(os.name == "nt", reason="a script stands in for LibreOffice's tool")
def test_connected_computed_disconnected(private_profile: Path, book: Path, tmp_path: Path) -> None:
    assert connect_calc()[0] == f"Steelyard {VERSION} is installed in LibreOffice for this user."
    assert connect_calc()[0] == f"Steelyard {VERSION} is installed in LibreOffice for this user."
    command = [str(soffice.find_tool("soffice")), f"-env:UserInstallation={private_profile.as_uri()}"]
    subprocess.run(
        [
            *AS_NOBODY,
            *command,
            "--headless",
            "--convert-to",
            "xlsx",
            "--outdir",
            str(tmp_path / "out"),
            str(book),
        ],
        check=True,
        capture_output=True,
        timeout=120,
    )
    values = openpyxl.load_workbook(tmp_path / "out" / "book.xlsx", data_only=True).worksheets[0]
    assert values["F1"].value == pytest.approx(call("SY_POWER", [PLAN, 0.05]), rel=1e-14)
    assert disconnect_calc() == [
        "Steelyard is removed from LibreOffice. Close LibreOffice and open it again."
    ]
    assert disconnect_calc() == [
        "Steelyard was not installed in LibreOffice for this user; nothing to remove."
    ]
