"""Plan books: every row planned or refused with its reason, values beside formulas, fixed bytes."""

import csv
import re
import zipfile
from dataclasses import replace

import pytest
from demo import DATA, LIST, Stored, build, demo
from openpyxl import load_workbook
from python_calamine import CalamineWorkbook

from steelyard.core.errors import SteelyardError
from steelyard.workbooks.book import build_book
from steelyard.workbooks.plans import plan_requests
from steelyard.workbooks.requests import Request, read_requests


@pytest.fixture(scope="module")
def book(tmp_path_factory):
    return build(tmp_path_factory.mktemp("book") / "demo.xlsx")


@pytest.fixture(scope="module")
def stored(book):
    return Stored(book)


def request(**fields):
    return Request(2, **({"characteristic": "Leak", "kind": "binomial", "claim": "2%"} | fields))


def planned_text(**fields):
    (planned,), problems = plan_requests([request(**fields)])
    assert problems == []
    return planned.text


# The demo list


def test_the_demo_list_covers_what_the_book_can_do():
    plans = [planned.plan for planned in demo()]
    assert len(plans) >= 24
    pairs = {(plan.kind, plan.claim.side) for plan in plans}
    kinds, sides = ("binomial", "poisson", "hypergeometric"), ("above", "below", "either")
    assert pairs >= {(kind, side) for kind in kinds for side in sides}
    assert sum(plan.rule.high == 1 and plan.claim.value > 0 for plan in plans) >= 2
    assert any(plan.verdict == "pass" for plan in plans)
    assert any(plan.claim.value == 5e-5 for plan in plans)


@pytest.mark.parametrize(
    ("characteristic", "text"),
    [  # common practice, no source: rows on which a careless search or rounding fails
        ("Wall below 0.9 mm", "hypergeometric | lot 60 | n 32 | claim D<=0 | alpha 0.05 | reject x>=1"),
        ("Regrind marker share", "binomial | n 50 | claim p=0.02 | alpha 0.05 | reject x>=4"),
        ("Body cracked", "binomial | n 46372 | claim p<=5e-05 | alpha 0.05 | reject x>=6"),
    ],
)
def test_the_awkward_rows(stored, characteristic, text):
    assert stored.register(characteristic, "Plan") == text


def test_an_empty_tail_is_said(stored):
    assert stored.register("Regrind marker share", "Reject up to") == "none"
    assert "no low count can reject" in stored.register("Regrind marker share", "Remark on the plan")


# Check value -> characteristic, heading of the Register, and how the stored cell becomes the value.
PUBLISHED = {
    "A-K03-02": ("Leak at 1 bar", "95 %", lambda rate: 100 * rate),
    "A-K03-03": ("Leak at 1 bar", "10 %", lambda rate: 100 * rate),
    "A-K03-05": ("Date code unreadable", "10 %", lambda rate: 100 * rate),
    "A-K03-08": ("Filter missing", "10 %", lambda rate: 100 * rate),
    "A-K03-09": ("Burst at 4 bar", "95 %", lambda rate: 100 * rate),
    "A-K03-10": ("Burst at 4 bar", "10 %", lambda rate: 100 * rate),
    "A-K03-11": ("Colour ring wrong", "95 %", lambda rate: 100 * rate),
    "A-K03-13": ("Barb pulls out below 90 N", "10 %", lambda rate: 100 * rate),
    "A-K03-14": ("Scratches", "95 %", lambda rate: 100 * rate),
    "A-K03-16": ("Specks in the tape wall", "95 %", lambda rate: 100 * rate),
    "A-K03-17": ("Specks in the tape wall", "50 %", lambda rate: 100 * rate),
    "A-K01-04": ("Flash on the barb", "Power at catch", lambda power: 1 - power),
    "A-K01-14": ("Disc warped", "Power at catch", lambda power: 1 - power),
    "A-K01-18": ("Cap loose", "Power at catch", lambda power: 1 - power),
    "A-K06-01": ("Coil label wrong", "Sample size", float),
    "A-K22-04": ("Cavity share after repair", "Power at catch", float),
}


@pytest.mark.parametrize("key", PUBLISHED)
def test_stored_cells_show_the_check_values(stored, key):
    """The check list names each value's source, and whether it was read or is from memory."""
    with (DATA / "check_values.csv").open(encoding="utf-8", newline="") as file:
        value = next(row["computed"] for row in csv.DictReader(file) if row["id"] == key)
    characteristic, heading, convert = PUBLISHED[key]
    digits = len(value.partition(".")[2])
    assert round(convert(stored.register(characteristic, heading)), digits) == float(value)


@pytest.mark.parametrize(
    ("characteristic", "key"), [("Off-nominal flow", "A-K05-02"), ("Off-nominal flow (new tool)", "A-K05-05")]
)
def test_stored_sizes_show_the_check_values(stored, characteristic, key):
    with (DATA / "check_values.csv").open(encoding="utf-8", newline="") as file:
        value = next(row["computed"] for row in csv.DictReader(file) if row["id"] == key)
    found = (stored.register(characteristic, "Reject from"), stored.register(characteristic, "Sample size"))
    assert f"{found[0]:g}/{found[1]:g}" == value


# Requests


def test_a_size_that_is_given_is_kept_and_its_shortfall_shown(stored):
    assert stored.register("Flash on the barb", "Sample size") == 52
    short = stored.register("Flash on the barb", "Shortfall of power")
    assert short == pytest.approx(0.9 - stored.register("Flash on the barb", "Power at catch"), abs=1e-15)
    assert stored.register("Blocked emitter", "Shortfall of power") in ("", None)


@pytest.mark.parametrize(
    ("fields", "text"),
    [
        ({"n": 50}, "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"),
        ({"n": 50, "alpha": 0.01}, "binomial | n 50 | claim p<=0.02 | alpha 0.01 | reject x>=5"),
        (
            {"claim": "p>=5%", "n": 59, "verdict": "pass"},
            "binomial | n 59 | claim p>=0.05 | alpha 0.05 | reject x<=0 | verdict pass",
        ),
        (
            {"claim": "5%", "catch": "20%", "power": 0.8},
            "binomial | n 27 | claim p<=0.05 | alpha 0.05 | reject x>=4",
        ),
        (
            {"claim": "0.05", "kind": "poisson", "n": 120.5},
            "poisson | units 120.5 | claim rate<=0.05 | alpha 0.05 | reject x>=11",
        ),
        (
            {"claim": "7%", "kind": "hypergeometric", "lot": 100, "n": 30},
            "hypergeometric | lot 100 | n 30 | claim D<=7 | alpha 0.05 | reject x>=5",
        ),
    ],
)
def test_requests_become_plans(fields, text):
    assert planned_text(**fields) == text


RATE = "a rate such as 8%, 0.08 or 200 ppm"
CLAIM = "a rate such as 2%, 0.02 or 50 ppm, or a claim such as p<=0.02 or D<=8"
LOT = {"kind": "hypergeometric", "lot": 100}


@pytest.mark.parametrize(
    ("fields", "column", "rest"),
    [
        ({}, "catch", "given where n is left empty, but got nothing"),
        ({"catch": "8%"}, "power", "given where n is left empty, but got nothing"),
        ({"n": 50, "lot": 100}, "lot", "empty for a plan of kind binomial, but got 100"),
        (LOT | {"sigma": 2.0, "n": 5}, "sigma", "empty for a plan of kind hypergeometric, but got 2"),
        (LOT | {"lot": None, "n": 5}, "lot", "given for a plan of kind hypergeometric, but got nothing"),
        (LOT | {"n": 101}, "n", "a whole number from 1 to the lot's 100, but got 101"),
        ({"n": 50.5}, "n", "a whole number from 1 to 10000000, but got 50.5"),
        ({"claim": "102%", "n": 50}, "claim", f"{CLAIM}, but got 102% (it must lie between 0 and 1)"),
        ({"catch": "1%", "power": 0.9}, "catch", f"{RATE}, but got 1% (it must lie above the claim p<=0.02)"),
        ({"catch": "8%", "power": 0.04}, "power", "greater than alpha, but got 0.04"),
        ({"claim": "p<=2%", "side": "below", "n": 50}, "side", "above for the claim p<=2%, but got below"),
    ],
)
def test_refused_rows_say_column_value_and_what_is_allowed(fields, column, rest):
    planned, problems = plan_requests([request(**fields)])
    assert planned == []
    assert [str(problem) for problem in problems] == [f"row 2: {column} must be {rest}"]


def test_good_rows_are_planned_beside_refused_ones():
    rows = [request(n=50), replace(request(n=50.5), row=3), replace(request(n=80), row=4)]
    planned, problems = plan_requests(rows)
    assert [(one.number, one.request.row) for one in planned] == [(1, 2), (2, 4)]
    assert [problem.row for problem in problems] == [3]


# The file


def test_same_inputs_give_the_same_bytes(tmp_path, book, monkeypatch):
    assert build(tmp_path / "again.xlsx").read_bytes() == book.read_bytes()
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "1767225600")
    dated = build(tmp_path / "dated.xlsx", justify=[])
    assert load_workbook(dated).properties.modified.isoformat() == "2026-01-01T00:00:00"


def test_only_formulas_that_can_be_empty_show_nothing(stored):
    """There is no second rate to catch, no size was given, or the side has no such end."""
    texts = [text for *_, text, value in stored.texts() if value is None]
    assert [text for text in texts if '=""' not in text and ',"",IF(ISTEXT(' not in text] == []


def test_no_stored_value_is_an_error_or_a_refusal(stored):
    values = [str(value) for *_, value in stored.texts()]
    assert [value for value in values if value.startswith(("#", "SY:"))] == []


def test_another_reader_sees_the_same_values(book, stored):
    other = CalamineWorkbook.from_path(book)
    sheet = stored.values["Register"]
    for row, found in zip(
        sheet.iter_rows(values_only=True), other.get_sheet_by_name("Register").to_python(), strict=False
    ):
        for ours, theirs in zip(row, found, strict=False):
            assert theirs == ("" if ours is None else ours)


@pytest.mark.parametrize(("host", "ours", "theirs"), [("excel", "SY_", "SY."), ("calc", "SY.", "SY_")])
def test_each_host_gets_its_spelling(tmp_path, host, ours, theirs):
    texts = [text for _, _, text, _ in Stored(build(tmp_path / "book.xlsx", host, justify=[])).texts()]
    assert any(ours in text for text in texts)
    assert not any(theirs in text for text in texts)


def test_no_formula_is_volatile_or_leaves_the_book(stored):
    words = ("NOW(", "TODAY(", "RAND", "OFFSET(", "INDIRECT(", "[", "http")
    assert [text for _, _, text, _ in stored.texts() if any(word in text.upper() for word in words)] == []


def test_one_array_formula_per_row_of_the_grid(stored):
    sheet = stored.formulas["Power grid"]
    areas = [cell.value.ref for row in sheet.iter_rows() for cell in row if hasattr(cell.value, "ref")]
    assert len(areas) == len(demo())
    assert all(re.fullmatch(r"D(\d+):[A-Z]+\1", area) for area in areas)


def test_the_package_is_whole(book):
    with zipfile.ZipFile(book) as archive:
        names = archive.namelist()
        assert archive.testzip() is None
    assert len(set(names)) == len(names)
    assert not [name for name in names if "vba" in name.lower() or "external" in name.lower()]


def test_hostile_texts_stay_texts(tmp_path):
    rows = [
        request(characteristic='=HYPERLINK("http://x")', n=50),
        request(characteristic="+cmd|' /c calc'!A0", n=50),
    ]
    planned, _ = plan_requests(rows)
    build_book(planned, tmp_path / "book.xlsx", justify="all")
    stored = Stored(tmp_path / "book.xlsx")
    assert stored.formulas["Register"]["B7"].data_type != "f"
    assert stored.values["Register"]["B8"].value == "+cmd|' /c calc'!A0"
    assert not [text for _, _, text, _ in stored.texts() if "HYPERLINK" in text.upper()]


# Options


def test_only_the_chosen_characteristics_are_justified(stored):
    assert "5 Burst at 4 bar" in stored.values.sheetnames
    assert "2 Off-nominal flow" not in stored.values.sheetnames


def test_names_to_justify_are_matched_or_refused(tmp_path):
    with pytest.raises(SteelyardError, match=r"but got burst at 4 bra \(did you mean Burst at 4 bar\?\)"):
        build(tmp_path / "book.xlsx", justify=["burst at 4 bra"])


def test_long_lists_get_no_justifications_unasked(tmp_path):
    planned = [replace(demo()[0], number=number) for number in range(1, 32)]
    summary = build_book(planned, tmp_path / "book.xlsx")
    assert (summary.characteristics, summary.justifications, summary.agreeing) == (31, 0, 31)
    assert str(summary) == "31 characteristics, 0 justifications; 31 of 31 native checks agree"


def test_refused_rows_are_listed_in_the_book(tmp_path):
    _, problems = plan_requests([request(n=50.5)])
    build(tmp_path / "book.xlsx", justify=[], problems=problems)
    texts = [cell.value for cell in Stored(tmp_path / "book.xlsx").values["Read me"]["B"]]
    assert "row 2: n must be a whole number from 1 to 10000000, but got 50.5" in texts


def test_the_list_of_the_demo_is_read_without_problems():
    assert len(read_requests(LIST)[0]) == len(demo())
