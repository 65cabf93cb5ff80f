"""What a cell hands over and what it gets back: blanks, errors, refusals, ranges."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.addin import SY_BETA, SY_BINOMIAL, SY_EXPLAIN, SY_POWER, SY_REGION, SY_SIZE
from steelyard.addin.cells import MOST_CELLS

PLAN = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"
OTHER = "binomial | n 20 | claim p<=0.02 | alpha 0.05 | reject x>=3"
LOT = "hypergeometric | lot 800 | n 50 | claim D<=8 | alpha 0.05 | reject x>=3"


def test_scalar_in_scalar_out():
    assert SY_POWER(PLAN, 0.1) == pytest.approx(0.749706094046692, rel=1e-12)
    assert type(SY_POWER(PLAN, 0.1)) is float


def test_percent_text_is_a_rate():
    assert SY_POWER(PLAN, "10%") == SY_POWER(PLAN, 0.1)


def test_plans_down_and_rates_across_give_a_table():
    table = SY_POWER([[PLAN], [OTHER]], [[0.02, 0.1, "20%"]])
    assert [len(row) for row in table] == [3, 3]
    assert table[1][2] == SY_POWER(OTHER, 0.2)


def test_a_row_of_rates_is_a_row_of_powers():
    assert SY_POWER(PLAN, [[0.1, 0.2]]) == [[SY_POWER(PLAN, 0.1), SY_POWER(PLAN, 0.2)]]


def test_one_cell_range_is_a_scalar():
    assert SY_POWER([[PLAN]], [[0.1]]) == SY_POWER(PLAN, 0.1)


def test_blank_cell_in_a_range_gives_an_empty_cell():
    assert SY_POWER(PLAN, [[0.1, None, ""]])[0][1:] == [None, None]
    assert SY_POWER([[PLAN], [None]], 0.1)[1] == [None]


def test_one_bad_cell_spoils_no_other():
    row = SY_POWER(PLAN, [[0.1, 5, "many", True, "#N/A"]])[0]
    assert row[0] == SY_POWER(PLAN, 0.1)
    assert row[1] == "SY: p must lie between 0 and 1, but got 5"
    assert row[2] == "SY: p must be a number, but got many"
    assert row[3] == "SY: rate must be a number or text, but got TRUE"
    assert row[4] == "#N/A"


def test_several_kinds_in_one_column():
    table = SY_POWER([[PLAN], [LOT], ["nonsense"]], [[0.01, 0.02]])
    assert table[1] == [SY_POWER(LOT, 8), SY_POWER(LOT, 16)]
    assert table[2][0].startswith("SY: kind must be one of ")


def test_blank_required_argument_is_refused():
    assert SY_POWER(PLAN, None) == "SY: rate must be given, but got nothing"
    assert SY_POWER(None, 0.1) == "SY: plan must be given, but got nothing"


def test_blank_optional_argument_takes_its_default():
    assert SY_BINOMIAL(50, 0.02, None, "") == SY_BINOMIAL(50, 0.02) == PLAN


def test_a_refusal_is_handed_on_unchanged():
    refused = SY_BINOMIAL(50, 0.02, 5)
    assert refused == "SY: alpha must lie between 0 and 1, but got 5 (type 5% or 0.05)"
    assert SY_POWER(refused, 0.1) == SY_SIZE(refused) == SY_REGION(refused) == refused


def test_an_error_value_is_passed_on_first():
    assert SY_POWER("#REF!", None) == "#REF!"


@pytest.mark.parametrize("count", [50.5, -3, 0, "fifty", True, 1e300])
def test_a_count_must_be_whole(count):
    assert SY_BINOMIAL(count, 0.02).startswith("SY: n must be ")


def test_whole_floats_are_counts():
    assert SY_BINOMIAL(50.0, 0.02) == PLAN


def test_beta_is_refused_where_the_claim_is_true():
    assert SY_BETA(PLAN, 0.01).startswith("SY: beta has no meaning here: the claim p<=0.02 is true at 0.01")
    assert SY_BETA(PLAN, 0.1) == pytest.approx(0.250293905953308, rel=1e-12)


def test_ranges_that_do_not_fit_are_refused():
    assert (
        SY_POWER([[PLAN]] * 3, [[0.1], [0.2]])
        == "SY: rate must fit the other ranges (3 by 1 cells), but got 2 by 1 cells"
    )


def test_a_table_beyond_the_limit_is_refused():
    side = int(MOST_CELLS**0.5) + 1
    assert SY_POWER([[PLAN]] * side, [[0.1] * side]).startswith("SY: a range must give at most 2000000 cells")


def test_too_many_arguments_are_refused():
    assert SY_SIZE(PLAN, 1, 2) == "SY: arguments must be at most 1 (plan), but got 3"


def test_a_column_of_sentences_answers_for_one_plan_only():
    assert SY_EXPLAIN([[PLAN], [OTHER]])[0][0].startswith("SY: this function answers with several cells")
    assert all(len(row) == 1 and len(row[0]) <= 255 for row in SY_EXPLAIN(PLAN))


SCALARS = st.one_of(
    st.none(),
    st.booleans(),
    st.integers(-5, 10**9),
    st.floats(allow_nan=False, allow_infinity=False),
    st.sampled_from([PLAN, LOT, "", " ", "5%", "#N/A", "p<=2%", "SY: refused", "above"]),
    st.text(max_size=30),
)


@given(
    st.lists(st.one_of(SCALARS, st.lists(st.lists(SCALARS, min_size=2, max_size=2), max_size=3)), max_size=4)
)
def test_nothing_escapes_as_an_exception(cells):
    def fine(answer):
        if isinstance(answer, list):
            return all(fine(cell) for row in answer for cell in row)
        if isinstance(answer, float):
            return answer == answer and abs(answer) != float("inf")
        return answer is None or type(answer) is int or (type(answer) is str and len(answer) <= 255)

    assert fine(SY_POWER(*cells))
    assert fine(SY_BINOMIAL(*cells))
