"""Plans as text: every plan survives writing and reading, every slip is named."""

from __future__ import annotations

import math
from decimal import Decimal
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.core.errors import InvalidValue
from steelyard.core.kind import heads, words_of
from steelyard.core.kinds.binomial import Items
from steelyard.core.kinds.hypergeometric import LotSample
from steelyard.core.kinds.poisson import Extent
from steelyard.core.plan import RELATIONS, SPLITS, VERDICTS, Claim, Plan, Reject
from steelyard.core.text import read_plan, write_plan

CANONICAL = [
    "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4",
    "binomial | n 59 | claim p>=0.05 | alpha 0.05 | reject x<=0 | verdict pass",
    "binomial | n 80 | claim p=0.5 | alpha 0.05 | split rarest | reject x<=30 or x>=50",
    "binomial | n 125 | reject x>=4",
    "poisson | units 120 | claim rate<=0.05 | alpha 0.05 | reject x>=11",
    "poisson | units 0.1 | claim rate=1e-05 | reject x>=1",
    "hypergeometric | lot 800 | n 50 | claim D<=8 | alpha 0.05 | reject x>=3",
    "hypergeometric | lot 60 | n 32 | claim D<=0 | alpha 0.05 | reject x>=1",
]


@pytest.mark.parametrize("text", CANONICAL)
def test_canonical_texts_are_written_back_as_they_are(text: str) -> None:
    assert write_plan(read_plan(text)) == text


@pytest.mark.parametrize(
    ("text", "canonical"),
    [
        ("BINOMIAL|REJECT X>=4|N 50|CLAIM P<=2%|ALPHA 5%", CANONICAL[0]),
        ("  binomial |  reject  x >= 4 | claim p ≤ 2 % | alpha .05 | n 50.0 ", CANONICAL[0]),
        ("binomial\n|\tn\t50 |\u00a0claim p<=20000ppm | alpha 5e-2 | reject x≥4 | split half", CANONICAL[0]),
        ("binomial | verdict Pass | n 59 | claim p>=5% | alpha 0.050 | reject x<=0", CANONICAL[1]),
        ("binomial | n 80 | claim p=50% | alpha 5% | split RAREST | reject x>=50  OR x<=30", CANONICAL[2]),
        ("poisson | units 100e-3 | claim rate=10 ppm | reject x>=1 | verdict fail", CANONICAL[5]),
        ("hypergeometric | n 50 | lot 800 | claim p<=1% | alpha 0.05 | reject x>=3", CANONICAL[6]),
        ("hypergeometric | n 50 | lot 800 | claim p<=0.0106 | alpha 0.05 | reject x>=3", CANONICAL[6]),
        ("hypergeometric | lot 60 | n 32 | claim p<=1% | alpha 0.05 | reject x>=1", CANONICAL[7]),
    ],
)
def test_order_case_spaces_and_units_are_free(text: str, canonical: str) -> None:
    assert write_plan(read_plan(text)) == canonical


def test_a_plan_read_is_a_value() -> None:
    plan = read_plan(CANONICAL[0])
    assert plan == Plan("binomial", Items(50), Reject(None, 4.0), Claim("p", "<=", 0.02), 0.05)
    assert len({plan, read_plan(CANONICAL[0])}) == 1


@st.composite
def plans(draw: st.DrawFn) -> Plan:
    kind = draw(st.sampled_from(["binomial", "poisson", "hypergeometric"]))
    n = draw(st.integers(3, 10**6))
    design: Any = {
        "binomial": lambda: Items(n),
        "poisson": lambda: Extent(draw(st.floats(1e-9, 1e9))),
        "hypergeometric": lambda: LotSample(draw(st.integers(n, 10**6)), n),
    }[kind]()
    side = draw(st.sampled_from(["above", "below", "either"]))
    low = float(draw(st.integers(0, n - 3)))
    rules = {
        "above": Reject(None, low + 1),
        "below": Reject(low, None),
        "either": Reject(low, float(draw(st.integers(int(low) + 2, n)))),
    }
    value, symbol = {
        "binomial": lambda: (draw(st.floats(1e-300, 1 - 1e-12)), "p"),
        "poisson": lambda: (draw(st.floats(1e-300, 1.0)), "rate"),
        "hypergeometric": lambda: (float(draw(st.integers(1, design.lot - 1))), "D"),
    }[kind]()
    return Plan(
        kind=kind,
        design=design,
        rule=rules[side],
        claim=draw(st.sampled_from([None, Claim(symbol, RELATIONS[side], value)])),
        alpha=draw(st.none() | st.floats(0, 1, exclude_min=True, exclude_max=True)),
        split=draw(st.sampled_from(SPLITS)),
        verdict=draw(st.sampled_from(VERDICTS)),
    )


@given(plan=plans(), data=st.data())
def test_writing_then_reading_gives_an_equal_plan(plan: Plan, data: st.DataObject) -> None:
    text = write_plan(plan)
    assert read_plan(text) == plan
    kind, *fields = text.split(" | ")
    jumbled = "|  ".join([kind.title(), *data.draw(st.permutations(fields))]).upper()
    assert read_plan(jumbled) == plan


def test_percent_is_taken_in_decimal_arithmetic() -> None:
    for tenths in range(1, 1000):
        plan = read_plan(f"binomial | n 50 | claim p<={tenths / 10}% | reject x>=4")
        assert plan.claim is not None
        assert Decimal(repr(plan.claim.value)) == Decimal(tenths) / 1000


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "binomal | n 50 | reject x>=4",
            "kind must be one of {kinds}, but got binomal (did you mean binomial?)",
        ),
        ("", "kind must be one of {kinds}, but got nothing"),
        ("#N/A", "kind must be one of {kinds}, but got #N/A"),
        (
            "binomial | n 50 | rejct x>=4",
            "field must be one of {fields}, but got rejct (did you mean reject?)",
        ),
        (
            "binomial | lot 50 | n 4 | reject x>=4",
            "field must be one of {fields}, but got lot",
        ),
        ("binomial | n 50 | n 60 | reject x>=4", "n must be written once, but got n 50 and n 60"),
        ("binomial | n | reject x>=4", "n must have a value, but got nothing"),
        ("binomial | reject x>=4", "plan must say n or stages or sequential, but got nothing"),
        ("hypergeometric | n 5 | reject x>=4", "lot must be written in the plan, but got nothing"),
        ("binomial | n 50", "reject must be written in the plan, e.g. reject x>=4, but got nothing"),
        ("binomial | n 0 | reject x>=4", "n must be a whole number from 1 to 10000000, but got 0"),
        ("binomial | n 50.5 | reject x>=4", "n must be a whole number from 1 to 10000000, but got 50.5"),
        ("binomial | n 5O | reject x>=4", "n must be a number, but got 5O"),
        (
            "binomial | n 50 | claim p<=2,5% | reject x>=4",
            "p must be a number, but got 2,5% (write decimals with a point)",
        ),
        ("binomial | n 50 | claim p<=2 | reject x>=4", "p must lie between 0 and 1, but got 2"),
        (
            "binomial | n 50 | claim p<0.02 | reject x>=4",
            "claim must have the form p<=0.02, p>=0.02 or p=0.02, but got p<0.02",
        ),
        ("binomial | n 50 | claim q<=2% | reject x>=4", "claim must be about p (defect rate), but got q<=2%"),
        (
            "binomial | n 50 | claim p<=2% | alpha 5 | reject x>=4",
            "alpha must lie between 0 and 1, but got 5 (type 5% or 0.05)",
        ),
        ("binomial | n 50 | alpha 0 | reject x>=4", "alpha must lie between 0 and 1, but got 0"),
        (
            "binomial | n 50 | split nearst | reject x>=4",
            "split must be one of half, nearest, rarest, but got nearst (did you mean nearest?)",
        ),
        ("binomial | n 50 | verdict good | reject x>=4", "verdict must be one of fail, pass, but got good"),
        ("binomial | n 50 | reject x>4", "reject must have the form x>=4 or x<=1 or x>=9, but got x>4"),
        ("binomial | n 50 | reject y>=4", "reject must have the form x>=4 or x<=1 or x>=9, but got y>=4"),
        (
            "binomial | n 50 | reject x>=4 or x>=5",
            "reject must have the form x>=4 or x<=1 or x>=9, but got x>=4 or x>=5",
        ),
        ("binomial | n 50 | reject x>=4.5", "reject must name whole numbers, but got x>=4.5"),
        ("binomial | n 50 | reject x>=51", "reject must name a value from 0 to 50, but got x>=51"),
        ("binomial | n 50 | reject x<=-1", "reject must name a value from 0 to 50, but got x<=-1"),
        (
            "binomial | n 50 | reject x>=0",
            "reject must leave some outcome that does not reject, but got x>=0",
        ),
        (
            "binomial | n 50 | reject x<=50",
            "reject must leave some outcome that does not reject, but got x<=50",
        ),
        (
            "binomial | n 50 | reject x<=3 or x>=4",
            "reject must leave some outcome that does not reject, but got x<=3 or x>=4",
        ),
        (
            "binomial | n 50 | reject x<=5 or x>=4",
            "reject must leave room between its two ends, but got x<=5 or x>=4",
        ),
        ("poisson | units 5 | reject x<=-1", "reject must name a value from 0, but got x<=-1"),
        (
            "binomial | n 50 | claim p<=2% | reject x<=0",
            "reject must not lie on the side where the claim p<=0.02 is true, but got x<=0",
        ),
        (
            "binomial | n 50 | claim p>=2% | reject x<=0 or x>=4",
            "reject must not lie on the side where the claim p>=0.02 is true, but got x<=0 or x>=4",
        ),
        ("poisson | units 0 | reject x>=4", "units must be greater than 0 and at most 1000000000, but got 0"),
        (
            "poisson | units 5 | claim rate<=1e12 | reject x>=4",
            "claim must expect at most 1000000000 defects in 5 units, but got rate<=1000000000000",
        ),
        ("poisson | units 5 | claim rate<=-1 | reject x>=4", "rate must be at least 0, but got -1"),
        (
            "hypergeometric | lot 5 | n 6 | reject x>=4",
            "n must be a whole number from 1 to the lot's 5, but got 6",
        ),
        (
            "hypergeometric | lot 60 | n 5 | claim D<=61 | reject x>=4",
            "D must be a whole number from 0 to 60, or a proportion of the lot, but got 61",
        ),
        (
            "hypergeometric | lot 60 | n 5 | claim D<=0.5 | reject x>=4",
            "claim must name a whole number of defectives, or a rate as p<=1%, but got D<=0.5",
        ),
        (
            "hypergeometric | lot 60 | n 5 | claim p=2% | reject x>=4",
            "rate must give a whole number of items in a lot of 60, but got 2%"
            " (neighbours: D = 1 is 0.0166667, D = 2 is 0.0333333)",
        ),
    ],
)
def test_slips_are_named(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    fields = ", ".join(words_of(heads()["binomial"]))
    assert str(refusal.value) == message.format(kinds=", ".join(heads()), fields=fields)
    assert len(str(refusal.value)) < 250


@given(
    st.text(max_size=300)
    | st.lists(
        st.sampled_from(["binomial", "|", "n", "50", "claim", "p", "<=", "0.02", "reject", "x", ">=", "4"])
    ).map(" ".join)
)
def test_any_text_is_read_or_refused_in_one_short_sentence(text: str) -> None:
    try:
        plan = read_plan(text)
    except InvalidValue as refusal:
        assert len(str(refusal)) < 250
    else:
        assert read_plan(write_plan(plan)) == plan


def test_claims_on_a_lot_round_in_exact_decimals_to_their_own_side() -> None:
    for claim, defectives in (
        ("p<=7%", 7.0),
        ("p>=7%", 7.0),
        ("p<=7.9%", 7.0),
        ("p>=6.1%", 7.0),
        ("p<=57%", 57.0),
    ):
        rule = "x>=9" if "<=" in claim else "x<=0"
        plan = read_plan(f"hypergeometric | lot 100 | n 50 | claim {claim} | reject {rule}")
        assert plan.claim is not None and plan.claim.value == defectives
    assert math.ceil(0.07 * 100) == 8  # what floats would give
