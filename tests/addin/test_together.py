"""Several characteristics on one sample, from the cells."""

from __future__ import annotations

import itertools
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.addin import SY_ACCEPTANCE, SY_BINOMIAL, SY_POWER, SY_SHARE_ALPHA, SY_TOGETHER
from steelyard.core.errors import InvalidValue
from steelyard.core.text import read_plan
from steelyard.core.together import failing, share_of_alpha, together

PLANS = [
    "binomial | n 50 | reject x>=4",
    "binomial | n 50 | reject x>=2",
    "hypergeometric | lot 800 | n 50 | reject x>=3",
    "poisson | units 50 | reject x>=9",
    "binomial | n 59 | claim p>=0.05 | reject x<=0 | verdict pass",
]
RATES = [0.01, "0.5%", 8, 0.05, 100 / 1e6]
COLUMN = [[plan] for plan in PLANS]


def test_independent_chances_multiply() -> None:
    passing = math.prod(SY_ACCEPTANCE(plan, rate) for plan, rate in zip(PLANS, RATES, strict=True))
    found = SY_TOGETHER(COLUMN, [[rate] for rate in RATES])
    assert found == pytest.approx(1 - passing, rel=1e-12)
    assert SY_TOGETHER([PLANS], [RATES]) == found  # a row is as good as a column


def test_every_outcome_counted() -> None:
    """The chances of all 32 ways in which five characteristics may pass or fail."""
    chances = [failing(read_plan(plan), rate) for plan, rate in zip(PLANS, RATES, strict=True)]
    total = math.fsum(
        math.prod(chance if fails else 1 - chance for chance, fails in zip(chances, way, strict=True))
        for way in itertools.product([True, False], repeat=5)
        if any(way)
    )
    assert SY_TOGETHER([PLANS], [RATES]) == pytest.approx(total, rel=1e-13)


def test_small_chances_keep_their_digits() -> None:
    plan = "binomial | n 50 | reject x>=12"
    assert SY_TOGETHER([[plan, plan]], 0.001) == pytest.approx(2 * SY_POWER(plan, 0.001), rel=1e-13)


def test_without_independence_the_chances_add_up_to_one_at_most() -> None:
    single = [failing(read_plan(plan), rate) for plan, rate in zip(PLANS, RATES, strict=True)]
    assert SY_TOGETHER([PLANS], [RATES], "any") == pytest.approx(sum(single), rel=1e-14)
    assert SY_TOGETHER([PLANS[:2]], 0.5, "any") == 1.0
    assert SY_TOGETHER([PLANS[:2]], 1) == 1.0


@given(
    chances=st.lists(st.sampled_from([0.001, 0.01, 0.02, 0.05, 0.2, 0.5]), min_size=1, max_size=6),
)
def test_the_bound_is_never_below(chances: list[float]) -> None:
    plans = [read_plan("binomial | n 20 | reject x>=2")] * len(chances)
    independent, bound = (together(plans, chances, relation) for relation in ("independent", "any"))
    assert max(failing(plans[0], rate) for rate in chances) <= independent * (1 + 1e-15)
    assert independent <= bound * (1 + 1e-15)


@pytest.mark.parametrize("relation", ["independent", "any"])
@pytest.mark.parametrize("count", [1, 3, 10])
def test_shares_keep_the_whole_below_its_limit(relation: str, count: int) -> None:
    alpha = SY_SHARE_ALPHA("5%", count, relation)
    plan = SY_BINOMIAL(200, "1%", alpha)
    assert SY_TOGETHER([[plan] * count], "1%", relation) <= 0.05
    whole = 1 - (1 - alpha) ** count if relation == "independent" else count * alpha
    assert whole == pytest.approx(0.05, rel=1e-13)


def test_a_published_share() -> None:
    """alpha 0.05 for three comparisons: 0.016952 (Sokal and Rohlf, Biometry, Dunn-Sidak; from memory)."""
    assert share_of_alpha(0.05, 3) == pytest.approx(0.016952, abs=5e-7)


def test_blank_rows_do_not_count() -> None:
    assert SY_TOGETHER([[PLANS[0]], [None], [""]], [[0.01], [None], [5]]) == SY_POWER(PLANS[0], 0.01)


@pytest.mark.parametrize(
    ("cells", "refusal"),
    [
        (([[PLANS[0], PLANS[1]]], [[0.01, None]]), "SY: rates must be given for every plan, but got nothing"),
        (([PLANS[:3]], [[1, 2]]), "SY: rates must be one for each of the 3 plan cells, but got 2"),
        (([[None]], 0.1), "SY: plans must hold at least one plan, but got nothing"),
        (([[None, ""]], 0.1), "SY: plans must hold at least one plan, but got nothing"),
        (([PLANS[:2]], 2), "SY: p must lie between 0 and 1, but got 2"),
        (([PLANS[:2]], 0.1, "none"), "SY: relation must be one of independent, any, but got none"),
        (([[PLANS[0], "SY: no plan"]], 0.1), "SY: no plan"),
        (([PLANS[:2]], [[0.1, "#N/A"]]), "#N/A"),
    ],
)
def test_refusals(cells: tuple[object, ...], refusal: str) -> None:
    assert SY_TOGETHER(*cells) == refusal


def test_as_many_rates_as_plans() -> None:
    with pytest.raises(InvalidValue, match=r"rates must be as many as the plans \(1\), but got 2"):
        together([read_plan(PLANS[0])], [0.1, 0.2])
