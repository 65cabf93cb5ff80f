"""Cell functions for what is measured."""

from __future__ import annotations

import pytest

from steelyard.addin import call


@pytest.mark.parametrize(
    ("name", "arguments", "answer"),
    [
        (
            "normal",
            [12.0, "mean>=500", 0.4],
            "normal | n 12 | sigma 0.4 | claim mean>=500 | alpha 0.05 | reject mean<=499.8100686631404",
        ),
        (
            "normal",
            [12, 500, 0.4, None, "below"],
            "normal | n 12 | sigma 0.4 | claim mean>=500 | alpha 0.05 | reject mean<=499.8100686631404",
        ),
        ("normal", [12, "mean>=500", None], "SY: sigma must be given, but got nothing"),
        ("normal", [12, "mean>=500", -1], "SY: sigma must be greater than 0, but got -1"),
        ("normal", [12.5, "mean>=500", 0.4], "SY: n must be a whole number of at least 1, but got 12.5"),
        ("normal", [12, True, 0.4], "SY: claim must be a number or text, but got TRUE"),
        ("normal", [12, "#N/A", 0.4], "#N/A"),
        ("student", [1, "mean>=500"], "SY: n must be a whole number from 2 to 100000, but got 1"),
        ("spread", [12, "s<=0.4"], "SY: claim must be about sigma (standard deviation), but got s<=0.4"),
        (
            "variables",
            ["1%", 0.05, "0.5%", 0.9],
            "SY: catch must lie above the claim p<=0.01, but got 0.5% (p = 0.005)",
        ),
        (
            "variables",
            ["1%", 0.05, "5%", 0.9, 0.3, 9.5, 9.7],
            "SY: p must be at least 73.89 %, the least that these limits allow, but got 1%",
        ),
        ("capability", [1, 1.33], "SY: n must be a whole number of at least 2, but got 1"),
        (
            "capability",
            [30, 1.33, 95],
            "SY: confidence must lie between 0 and 1, but got 95 (type 95% or 0.95)",
        ),
        (
            "capability",
            [30, 1.33, 0.95, "cpk"],
            "SY: measure must be one of ppk, coverage, but got cpk (did you mean ppk?)",
        ),
        (
            "life",
            ["life<=1000", 0.1, 2500],
            "life | time 2500 | claim life<=1000 | alpha 0.1 | reject failures<=0 | verdict pass",
        ),
        (
            "life",
            ["life<=1000", 0.1, 500, "clock", 20],
            "life | units 20 | clock 500 | claim life<=1000 | alpha 0.1 | reject failures<=4 | verdict pass",
        ),
        (
            "life",
            ["life>=1000", 0.1],
            "SY: amount must be given, except to show a longer life in the least time, but got nothing",
        ),
        (
            "estimate",
            ["binomial | n 5 | reject x>=1", 2],
            "SY: a plan of kind binomial has no estimate of a fraction outside limits",
        ),
    ],
)
def test_answers(name: str, arguments: list[object], answer: str) -> None:
    assert call(name, arguments) == answer


def test_plans_and_powers_of_a_range() -> None:
    plans = call("student", [[[8], [12], [None]], "mean>=500", 0.05, None, 0.4])
    assert [row[0] is None for row in plans] == [False, False, True]
    powers = call("power", [plans, [[499.5, 500, "x"]]])
    assert powers[1][:2] == pytest.approx([0.9918042461575751, 0.05])
    assert powers[1][2] == "SY: mean must be a number, but got x"
    assert powers[2] == [None, None, None]
    assert call("power", [plans[1][0], 499.5, 0.8]) == pytest.approx(0.649662, abs=1e-6)


def test_capability_is_a_table_of_labels_and_values() -> None:
    rows = call("capability", [10, 0.95, 0.95, "coverage"])
    assert [len(row) for row in rows] == [2] * 8
    assert dict(rows[:3]) == pytest.approx(
        {"Ppk of the sample": 0.97032, "k, one limit": 2.91096, "k, two limits": 3.39343}, abs=1e-5
    )
    assert rows[3][1].startswith("variables | n 10 | sigma unknown | accept (upper-mean)/s>=2.91096")
    assert all(len(row[0]) <= 255 and row[1] is None for row in rows[4:])


def test_estimates_and_decisions() -> None:
    plan = call("variables", ["1%", "5%", "5%", "90%", None, None, 10.5])
    assert call("estimate", [plan, "mean 10.1 s 0.2"]) == pytest.approx(0.021205, abs=1e-6)
    assert call("decide", [plan, "mean 10.1 s 0.2"]) == "not rejected: pass"
    assert call("critical", [plan]) == pytest.approx(1.9521931)
    assert call("region", [plan]).startswith("(upper-mean)/s < 1.95219")
