"""Demonstration plans against published sizes and against every smaller sample."""

from __future__ import annotations

import csv
import math
import re
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.addin import SY_DEMONSTRATION
from steelyard.core.demonstration import demonstration
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.questions import acceptance, size
from steelyard.core.review import check, sentences
from steelyard.core.text import read_plan, write_plan

ROWS = Path(__file__).parents[2] / "workbooks" / "data" / "check_values.csv"


def published() -> list[Any]:
    with ROWS.open(encoding="utf-8", newline="") as file:
        found = [row for row in csv.DictReader(file) if row["kind"].startswith("K20 ")]
    assert len(found) == 11
    return [pytest.param(row, id=f"{row['id']}, {row['read_or_memory']}: {row['source']}") for row in found]


@pytest.mark.parametrize("row", published())
def test_check_value(row: dict[str, str]) -> None:
    numbers = [float(number) for number in re.findall(r"[\d.]+\d|\d+", row["inputs"])]
    if row["inputs"].startswith("reliability"):
        reliability, confidence, allowed = numbers[:3]
        found = demonstration(round(1 - reliability, 12), confidence, allowed).design.n
    elif "5 or fewer" in row["quantity"]:
        found = demonstration(numbers[0], 0.9, 5).design.n
    else:  # the largest sample without a failure that shows nothing yet
        confidence = 1 - float(row["quantity"].rpartition(" ")[2])
        found = demonstration(numbers[0], round(confidence, 12)).design.n - 1
    assert found == int(row["published"])


def test_the_table_of_sizes_for_none_to_five_allowed() -> None:
    """S. S. Wilks, Ann. Math. Statist. 12 (1941): 59, 93, 124, 153, 181, 208 (from memory)."""
    table = SY_DEMONSTRATION(0.05, "95%", [[0, 1, 2, 3, 4, 5]])
    assert [read_plan(text).design.n for text in table[0]] == [59, 93, 124, 153, 181, 208]


@given(
    worst=st.sampled_from([0.005, 0.01, 0.02, 0.05, 0.1, 0.25, 0.5]),
    confidence=st.sampled_from([0.5, 0.8, 0.9, 0.95, 0.99]),
    allowed=st.integers(0, 5),
)
def test_one_item_fewer_does_not_do(worst: float, confidence: float, allowed: int) -> None:
    plan = demonstration(worst, confidence, allowed)
    n = plan.design.n
    assert stats.binom.cdf(allowed, n, worst) <= 1 - confidence < stats.binom.cdf(allowed, n - 1, worst)
    assert plan.rule.low == allowed and check(plan) == "ok"
    assert acceptance(plan, worst) == size(plan) <= 1 - confidence + 1e-15


@given(
    lot=st.integers(30, 500),
    percent=st.integers(2, 40),
    confidence=st.sampled_from([0.8, 0.9, 0.95]),
    allowed=st.integers(0, 3),
)
def test_one_item_of_a_lot_fewer_does_not_do(lot: int, percent: int, confidence: float, allowed: int) -> None:
    defectives = math.ceil(lot * percent / 100)
    if allowed >= defectives:
        with pytest.raises(NoAnswer, match="can reject the claim"):
            demonstration(f"{percent}%", confidence, allowed, lot)
        return
    plan = demonstration(f"{percent}%", confidence, allowed, lot)
    reached = [stats.hypergeom.cdf(allowed, lot, defectives, plan.design.n - fewer) for fewer in (0, 1)]
    assert reached[0] <= (1 - confidence) * (1 + 1e-12) and reached[1] > (1 - confidence) * (1 - 1e-12)
    assert plan.claim is not None and plan.claim.value == defectives
    assert plan.rule.low == allowed and write_plan(read_plan(write_plan(plan))) == write_plan(plan)


def test_a_tie_is_enough() -> None:
    """60 items, one defective, confidence 95 %: 57 drawn leave exactly 3/60."""
    assert demonstration(1, "95%", lot=60).design.n == 57
    assert size(demonstration(1, "95%", lot=60)) == pytest.approx(0.05, rel=1e-14)


def test_what_a_passing_lot_has_shown_is_said() -> None:
    told = sentences(demonstration("1%", "95%"))
    assert "A lot that passes has shown, with confidence 95.05 %: defect rate below 1 %." in told
    lot = sentences(demonstration("5%", "90%", lot=60))
    assert "A lot that passes has shown, with confidence 90.43 %: defectives in the lot below 3." in lot


@pytest.mark.parametrize(
    ("given_values", "message"),
    [
        (("1%", 5), r"confidence must lie between 0 and 1, but got 5 \(type 5% or 0.05\)"),
        (("1%", 0.95, 1.5), "allowed must be a whole number of at least 0, but got 1.5"),
        ((0, 0.95), "claim must be false for some p, but got p>=0"),
        (("1%", 0.95, 0, 1), "lot must be a whole number from 2 to 1000000, but got 1"),
        ((1e-8, 0.95), "no sample of up to 10000000 with 0 allowed can reject the claim p>=1e-08"),
        (("5%", 0.95, 10_000_000), "no sample of up to 10000000 with 10000000 allowed can reject the claim"),
    ],
)
def test_refusals(given_values: tuple[Any, ...], message: str) -> None:
    with pytest.raises((InvalidValue, NoAnswer), match=message):
        demonstration(*given_values)


def test_cells() -> None:
    assert SY_DEMONSTRATION("1%", "95%").startswith("binomial | n 299 | claim p>=0.01 | alpha 0.05 | ")
    assert SY_DEMONSTRATION("1%", "95%", None, 800) == SY_DEMONSTRATION("1%", "95%", 0, 800)
    assert SY_DEMONSTRATION("1%", "95%", True) == "SY: allowed must be a number or text, but got TRUE"
