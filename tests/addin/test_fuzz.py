"""No cell function breaks its promises, whatever the cells hold; what the search found stays found."""

from __future__ import annotations

from typing import Any

import pytest
from fuzz import complaint, search

from steelyard.addin import SY_NATIVE, SY_POWER, SY_RATE_FOR, call

PLAN = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"
BEYOND = 10**400  # a whole number that no float can hold


@pytest.mark.parametrize("seed", range(3))
def test_no_promise_is_broken(seed: int) -> None:
    assert list(search(600, seed)) == []


@pytest.mark.parametrize(
    ("answer", "wrong"),
    [
        (float("nan"), "the number nan"),
        (float("inf"), "the number inf"),
        (True, "a cell of type bool"),
        (None, "a blank for a single cell"),
        ([[1.0], [1.0, 2.0]], "uneven rows"),
        ([], "uneven rows"),
        ("x" * 256, "a text of 256 characters"),
        ([[None, "x", 1, 0.5]], None),
    ],
)
def test_the_search_knows_a_broken_promise(answer: Any, wrong: str | None) -> None:
    assert complaint(answer) == wrong


def test_a_whole_number_without_a_float_is_refused() -> None:
    refused = "SY: p must be a finite number, but got 1" + "0" * 38 + "…"
    assert call("SY_POWER", [PLAN, BEYOND]) == refused
    assert call("SY_POWER", [PLAN, [[0.1, BEYOND]]])[0] == [SY_POWER(PLAN, 0.1), refused]


def test_too_few_or_too_many_arguments_over_a_range() -> None:
    missing = "SY: power must be given, but got nothing"
    assert SY_RATE_FOR([[PLAN], [PLAN]]) == [[missing], [missing]]
    message = "SY: arguments must be at most 3 (plan, power, end), but got 4"
    assert SY_RATE_FOR([[PLAN], [PLAN]], 0.9, None, 1) == message


def test_targets_that_show_nothing_are_refused() -> None:
    assert call("capability", [2, 1e-83, "99%"]) == "SY: target must be a Ppk from 0.001 to 10, but got 1e-83"
    refused = "SY: target must be a coverage of at least 0.001, but got 1e-20"
    assert call("capability", [2, 1e-20, "99%", "coverage"]) == refused


def test_limits_too_far_apart_for_their_sigma_are_refused() -> None:
    arguments = ["p>=5%", 0.01, 0.02, 0.9, 0.4, 800, 8e160]
    refused = "SY: sigma must be at least 8e+151 for limits so far apart, but got 0.4"
    assert call("variables", arguments) == refused


def test_a_signalling_nan_is_no_number() -> None:
    assert call("SY_POWER", [PLAN, "snan"]) == "SY: p must be a number, but got snan"


@pytest.mark.parametrize("cell", ["B2", "$b$2", "Grid!B2", "'Power grid'!$B$2", "$Grid.B2", "true_rate"])
def test_native_formulas_take_addresses(cell: str) -> None:
    assert SY_NATIVE(PLAN, cell).count(cell) == SY_NATIVE(PLAN, "B2").count("B2") > 0


@pytest.mark.parametrize("cell", ["B2+1", "50| x", "B2,B3", "x" * 61, "2", "'B2"])
def test_native_formulas_take_nothing_else(cell: str) -> None:
    assert SY_NATIVE(PLAN, cell).startswith(
        "SY: cell must be the address of a cell, such as B2 or 'Power grid'!B2"
    )


@pytest.mark.parametrize("rate", ["-5%", "150%", "-1 ppm"])
def test_a_share_of_the_lot_lies_between_nothing_and_all(rate: str) -> None:
    plan = "hypergeometric | lot 60 | n 32 | claim D<=0 | alpha 0.05 | reject x>=1"
    assert SY_POWER(plan, rate) == f"SY: rate must lie between 0 and 1, but got {rate}"


def test_lines_have_finite_numbers() -> None:
    plan = "binomial | sequential to 9 | accept x<=0.1*n-1 | reject x>=0.1*n+1e999 | at end accept x<=1"
    assert call("check", [plan]).startswith("SY: reject must be a finite number, but got ")


def test_a_number_too_large_for_a_decimal_is_no_number() -> None:
    assert call("SY_POWER", [PLAN, "1e99999999999"]) == "SY: p must be a number, but got 1e99999999999"


def test_a_stage_without_a_float_is_refused() -> None:
    answer = call("stages", ["binomial", [[50], [50]], [[1], [4]], [[4], [BEYOND]]])
    assert answer.startswith("SY: rejects must be a finite number, but got 1000")


def test_an_alpha_below_what_is_computed_is_refused() -> None:
    refused = "SY: alpha must be at least 1e-290, but got 5e-324"
    assert call("SY_VARIABLES", ["p<=2%", 5e-324, "10%", 0.9]) == refused


def test_a_confidence_of_nothing_is_refused() -> None:
    refused = "SY: confidence must be at least 1e-06, but got 1e-64"
    student = "student | n 12 | planning-sigma 0.4 | claim mean>=500 | alpha 0.05 | reject t<=-1.7958848187"
    assert call("limit", [student, "mean 499.7 s 0.31", "upper", 1e-64]) == refused
    assert call("limit", [PLAN, 1, "lower", 1e-64]) == refused


def test_a_range_for_one_answer_is_limited() -> None:
    refused = "SY: plans must be a range of at most 10000 cells, but got 10001"
    assert call("best", [[[PLAN]] * 10_001, 0.1]) == refused
