"""Cells for plans in stages and for outgoing quality, as a spreadsheet calls them."""

from __future__ import annotations

import pytest

from steelyard.addin import call

DOUBLE = "binomial | stages 50 then 50 | accept 1 then 4 | reject 4 then 5 | claim p<=0.02"
SINGLE = "binomial | n 50 | reject x>=4"


def test_a_plan_is_made_from_texts_and_from_ranges() -> None:
    assert call("SY_STAGES", ["binomial", "50 then 50", "1 then 4", "4 then 5", "2%"]) == DOUBLE
    assert call("SY_STAGES", ["binomial", [[50.0, 50.0]], [[1.0, 4.0]], [[4.0], [5.0]], 0.02]) == DOUBLE
    ranges = [[50.0, 50.0, None]], [[None, 4.0, ""]], [["none", 5.0, None]]
    assert call("SY_STAGES", ["hypergeometric", *ranges, 0.02, 800.0, "on-reject", 0.05]) == (
        "hypergeometric | lot 800 | stages 50 then 50 | accept none then 4 | reject none then 5"
        " | stop on-reject | claim D<=16 | alpha 0.05"
    )
    assert call("SY_STAGES", ["binomial", 50.0, 3.0, 4.0]) == "binomial | stages 50 | accept 3 | reject 4"


@pytest.mark.parametrize(
    ("arguments", "refusal"),
    [
        (["binomial", "50 then 50", "x", "4 then 5"], "SY: accept must be a number, but got x"),
        (["gauss", "50", "3", "4"], "SY: kind must be one of binomial, poisson, hyperg"),
        (["binomial", [[None, None]], "3", "4"], "SY: sizes must hold at least one number, but got nothing"),
        (["binomial", [[50.0, True]], "3", "4"], "SY: sizes must be a number or text, but got TRUE"),
        (["hypergeometric", "50", "3", "4"], "SY: lot must be given for a plan of kind staged hyp"),
        (["binomial", "50", "3", "4", "2%", 800], "SY: lot must be left out for a plan of kind staged"),
        (["binomial", "50", "3", "4", "p>=2%"], "SY: claim must have the form p<=… for a plan that"),
        (["binomial", "#N/A", "3", "4"], "#N/A"),
    ],
)  # fmt: skip
def test_refusals_are_texts(arguments: list, refusal: str) -> None:
    assert call("SY_STAGES", arguments).startswith(refusal)


def test_every_question_works_on_a_plan_in_stages() -> None:
    assert call("SY_POWER", [DOUBLE, "5%"]) == pytest.approx(0.5179942972532836, rel=1e-12)
    assert call("SY_ACCEPTANCE", [[[DOUBLE], [SINGLE]], [[0.02, 0.05]]])[0][0] == pytest.approx(
        0.9516393147487261
    )
    assert call("SY_SIZE", [DOUBLE]) == pytest.approx(0.048360685251273905, rel=1e-12)
    assert call("SY_BETA", [DOUBLE, "5%"]) == pytest.approx(1 - 0.5179942972532836, rel=1e-12)
    assert call("SY_REGION", [DOUBLE]) == "accept 1 then 4; reject 4 then 5"
    assert call("SY_DECIDE", [DOUBLE, [["2"], ["2+1"], ["2+3"]]]) == [
        ["take the next 50"], ["not rejected: pass"], ["claim rejected: fail"],
    ]  # fmt: skip
    assert call("SY_PVALUE", [DOUBLE, "2+3"]) == pytest.approx(call("SY_SIZE", [DOUBLE]), rel=1e-12)
    assert call("SY_LIMIT", [DOUBLE, "2+1", "upper", "95%"]) == pytest.approx(0.0939170201396, rel=1e-9)
    assert call("SY_RATE_FOR", [DOUBLE, 0.9]) == pytest.approx(0.0855, abs=1e-4)
    assert call("SY_CHECK", [DOUBLE]) == "ok"
    assert call("SY_FIELD", [DOUBLE, "stages"]) == "50 then 50"
    assert call("SY_BEST", [[[DOUBLE], [SINGLE]], "5%"]) == DOUBLE


@pytest.mark.parametrize(
    ("name", "arguments"),
    [
        ("SY_CRITICAL", [DOUBLE]),
        ("SY_SMALLEST", ["staged binomial", 0.01, 0.05, 0.05, 0.9]),
        ("SY_RULE", ["staged binomial", 50, 4]),
        ("SY_PVALUE", [DOUBLE, 2]),
    ],
)
def test_what_has_no_meaning_is_refused_in_a_sentence(name: str, arguments: list) -> None:
    assert call(name, arguments).startswith("SY: ")


def test_average_sample_as_a_table() -> None:
    mean = "normal | n 12 | sigma 0.4 | claim mean>=500 | alpha 0.05 | reject mean<=499.8"
    table = call("SY_AVERAGE_SAMPLE", [[[DOUBLE], [SINGLE], [mean], [None]], [[0.01, "5%"]]])
    assert table[0] == pytest.approx([54.39195700026489, 74.0488104314702], rel=1e-12)
    assert table[1:] == [[50.0, 50.0], [12.0, 12.0], [None, None]]
    assert call("SY_AVERAGE_SAMPLE", [DOUBLE, 2]) == "SY: p must lie between 0 and 1, but got 2"


def test_ways_to_end_are_rows() -> None:
    rows = call("SY_ENDINGS", [DOUBLE, "5%"])
    assert [row[0] for row in rows] == [50.0, 100.0]
    assert sum(row[1] + row[2] for row in rows) == pytest.approx(1, rel=1e-12)
    assert call("SY_ENDINGS", [SINGLE, "5%"])[0][2] == call("SY_POWER", [SINGLE, "5%"])


def test_outgoing_quality() -> None:
    lot = "hypergeometric | lot 200 | n 50 | reject x>=2"
    assert round(call("SY_OUTGOING", [lot, 8]), 5) == 0.01316
    assert call("SY_OUTGOING", [lot, "4%"]) == call("SY_OUTGOING", [lot, 8, 200])
    assert call("SY_OUTGOING", [[[DOUBLE], [SINGLE]], [[0.01, 0.05]], 1000])[1][1] == pytest.approx(
        0.05 * call("SY_ACCEPTANCE", [SINGLE, 0.05]) * 0.95, rel=1e-12
    )
    assert call("SY_OUTGOING_LIMIT", [DOUBLE, 1000])[0] == pytest.approx([0.0246687048, 0.0381266], rel=1e-6)
    assert call("SY_OUTGOING", [DOUBLE, 0.05, 1000, "removed"]) > call("SY_OUTGOING", [DOUBLE, 0.05, 1000])
    assert call("SY_TOTAL_INSPECTED", [DOUBLE, 0.0, 1000]) == 50
    assert call("SY_OUTGOING", [DOUBLE, 0.05]) == (
        "SY: lot must be given for a plan that does not name it, but got nothing"
    )


def test_the_double_plan_for_two_risks() -> None:
    assert call("SY_DOUBLE", ["binomial", 0.01, 0.05, 0.05, 0.9]) == (
        "binomial | stages 69 then 69 | accept 0 then 3 | reject 4 then 4 | claim p<=0.01 | alpha 0.05"
    )
    assert call("SY_DOUBLE", ["binomial", 0.01, 0.05, 0.05, 0.9, 3]).startswith("SY: ratio must be 1 or 2")


def test_a_sequential_plan_and_its_table() -> None:
    plan = call("SY_SEQUENTIAL", [0.01, 0.05, 0.1, 0.9])
    assert plan.startswith("binomial | sequential to 104 | accept x<=0.039747")
    assert call("SY_SIZE", [plan]) <= 0.05 < 0.9 < call("SY_POWER", [plan, 0.1])
    rows = call("SY_STEPS", [plan])
    assert rows[:3] == [[1.0, None, 2], [20.0, None, 3], [24.0, 0, 3]]
    assert rows[-1] == [104.0, 3, 4]
    assert call("SY_STEPS", [DOUBLE]) == [[50.0, 1, 4], [100.0, 4, 5]]
    assert (
        call("SY_STEPS", [SINGLE])
        == "SY: a plan of kind binomial has no steps: it decides once, see SY_REGION"
    )
    assert call("SY_DECIDE", [plan, "40 inspected 2 found"]) == "take the next item"
    assert call("SY_NATIVE", [plan, "B2"]).startswith("SY: the spreadsheet's own functions cannot give")
    assert call("SY_SEQUENTIAL", [0, 0.05, 0.1, 0.9]).startswith(
        "SY: claim must be of the form p<=0.02, above 0"
    )
    assert call("SY_OUTGOING_LIMIT", [plan, 1000])[0][0] < 0.06


def test_a_scheme_that_switches() -> None:
    normal, tightened, reduced = (
        f"binomial | n {n} | reject x>={r}" for n, r in ((125, 4), (125, 3), (50, 2))
    )
    row = call("SY_SWITCHING", [normal, tightened, [[0.0, 0.01, None]], reduced])
    assert row[0][0] == 1.0
    assert row[0][1] == pytest.approx(0.9425683094867349, rel=1e-12)
    assert row[0][2] is None
    shares = [
        call("SY_SWITCHING", [normal, tightened, "1%", reduced, mode])
        for mode in ("normal", "tightened", "reduced")
    ]
    assert sum(shares) == pytest.approx(1)
    assert call("SY_SWITCHING", [normal, tightened, "1%", None, "sample"]) == pytest.approx(125)
    assert call("SY_SWITCHING", [normal, tightened, "1%", None, "lots", "stop never"]).startswith(
        "SY: inspection is never"
    )
    assert call("SY_SWITCHING", [normal, tightened, "1%", None, None, "loosen 5"]).startswith(
        "SY: rules must be one of"
    )
    assert call("SY_SWITCHING", [normal, tightened, "1%", None, "best"]).startswith(
        "SY: answer must be one of"
    )
