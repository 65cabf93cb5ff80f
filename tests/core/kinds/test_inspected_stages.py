"""Plans in stages and sequential plans whose inspection errs, against every order of draws and every slip."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import permutations, product
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.core.assurance import assurance
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.forms import plain, with_fields
from steelyard.core.kind import kind_of
from steelyard.core.kinds.inspected_stages import condemned_items
from steelyard.core.numbers import typed
from steelyard.core.outgoing import average_sample
from steelyard.core.plan import Plan
from steelyard.core.questions import not_rejected, power, size
from steelyard.core.review import sentences
from steelyard.core.text import read_plan, write_plan

ITEMS = (
    "binomial | stages 50 then 50 | misses 0.1 | false-alarms 0.01"
    " | accept 1 then 4 | reject 4 then 5 | claim p<=0.02"
)
UNITS = (
    "poisson | stages 50 then 50 | misses 0.2 | false-alarms 0.01"
    " | accept 1 then 4 | reject 4 then 5 | claim rate<=0.02"
)
LOT = (
    "hypergeometric | lot 200 | stages 20 then 20 | misses 0.1 | false-alarms 0.01"
    " | accept 0 then 2 | reject 2 then 3 | claim D<=8"
)
LINES = (
    "binomial | sequential to 120 | misses 0.1 | false-alarms 0.01 | accept x<=0.04*n-0.94"
    " | reject x>=0.04*n+1.21 | at end accept x<=3 | claim p<=0.02"
)
ALL = [ITEMS, UNITS, LOT, LINES]


@pytest.mark.parametrize("text", [*ALL, ITEMS.replace("| claim", "| stop on-reject | claim")])
def test_texts_and_sentences(text: str) -> None:
    plan = read_plan(text)
    assert write_plan(plan) == text
    assert write_plan(with_fields(plain(plan), "misses", **errors(plan))) == text
    told = sentences(plan)
    assert all(len(sentence) <= 255 for sentence in told)
    perfect = f"{size(plain(plan)) * 100:.4g} %"
    assert (
        f"With perfect inspection a true claim would be rejected with probability {perfect} at most." in told
    )


def errors(plan: Plan) -> dict[str, float]:
    return {"misses": plan.design.misses, "false_alarms": plan.design.false_alarms}


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (ITEMS.replace("misses 0.1", "misses 1"), "misses must be at least 0 and less than 1, but got 1"),
        (ITEMS.replace("misses 0.1 | ", ""), "misses must be written in the plan, but got nothing"),
        (LOT.replace("lot 200", "lot 10001"), "lot must be at most 10000 where inspection in stages errs"),
        (
            UNITS.replace("alarms 0.01", "alarms 1e8"),
            "false-alarms must expect from 0 to 1000000000 false finds in 100 units, but got 100000000",
        ),
        (
            LINES.replace("0.01", "0.95", 1),
            "misses and false-alarms must add up to less than 1, but got 1.05",
        ),
    ],
)
def test_slips_are_named(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    assert str(refusal.value).startswith(message)


@pytest.mark.parametrize("text", [ITEMS, LINES])
@pytest.mark.parametrize("p", [0.0, 0.001, 0.05, 0.5, 1.0])
def test_a_process_goes_by_the_rate_found(text: str, p: float) -> None:
    plan = read_plan(text)
    found = p * 0.9 + (1 - p) * 0.01
    assert power(plan, p) == pytest.approx(power(plain(plan), found), rel=1e-12)
    assert not_rejected(plan, p) == pytest.approx(not_rejected(plain(plan), found), rel=1e-12)
    assert average_sample(plan, p) == pytest.approx(average_sample(plain(plan), found), rel=1e-12)


def test_defects_go_by_the_rate_found() -> None:
    plan = read_plan(UNITS)
    assert power(plan, 0.05) == pytest.approx(power(plain(plan), 0.05), rel=1e-12)  # 0.05 * 0.8 + 0.01
    assert power(plan, 0) == pytest.approx(power(plain(plan), 0.01), rel=1e-12)


def drawn(
    defectives: int, misses: Fraction, false_alarms: Fraction, early: bool
) -> tuple[Fraction, Fraction]:
    """Return power and average sample of 2 then 2 items from a lot of 6, accept 0 then 1, reject 2 then 2."""
    reject = spent = Fraction(0)
    orders = list(permutations([True] * defectives + [False] * (6 - defectives), 4))
    for order in orders:
        for finds in product([1, 0], repeat=4):
            chance = Fraction(1, len(orders))
            for defective, found in zip(order, finds, strict=True):
                rate = 1 - misses if defective else false_alarms
                chance *= rate if found else 1 - rate
            first, both = sum(finds[:2]), sum(finds)
            rejected = first >= 2 or (first == 1 and both >= 2)
            reject += chance * rejected
            items = 2 if first != 1 else (3 if early and sum(finds[:3]) >= 2 else 4)
            spent += chance * items
    return reject, spent


@pytest.mark.parametrize("early", [False, True])
@pytest.mark.parametrize("defectives", range(7))
def test_a_small_lot_in_every_order_with_every_slip(defectives: int, early: bool) -> None:
    stop = " | stop on-reject" if early else ""
    plan = read_plan(
        "hypergeometric | lot 6 | stages 2 then 2 | misses 0.3 | false-alarms 0.15"
        f" | accept 0 then 1 | reject 2 then 2{stop}"
    )
    reject, spent = drawn(defectives, typed(0.3), typed(0.15), early)
    assert power(plan, defectives) == pytest.approx(float(reject), rel=1e-12)
    assert not_rejected(plan, defectives) == pytest.approx(float(1 - reject), rel=1e-12)
    assert average_sample(plan, defectives) == pytest.approx(float(spent), rel=1e-12)


@pytest.mark.parametrize("defectives", [0, 3, 8, 30, 120, 200])
def test_lots_agree_with_a_walk_over_found_and_true_counts(defectives: int) -> None:
    """scipy.stats.hypergeom and binom, with the state (found, true) carried from stage to stage."""

    def finds(true: int, n: int) -> Any:
        caught, alarmed = (
            stats.binom.pmf(np.arange(n + 1), k, rate) for k, rate in ((true, 0.9), (n - true, 0.01))
        )
        return np.convolve(caught, alarmed)[: n + 1]

    reject = 0.0
    for true in range(21):
        came = stats.hypergeom.pmf(true, 200, defectives, 20)
        if came == 0:
            continue
        first = finds(true, 20)
        reject += came * first[2:].sum()
        for more in range(21):
            next_came = stats.hypergeom.pmf(more, 180, defectives - true, 20)
            if next_came > 0:
                reject += came * first[1] * next_came * finds(more, 20)[2:].sum()
    assert power(read_plan(LOT), defectives) == pytest.approx(reject, rel=1e-9)


def test_single_samples_in_one_stage() -> None:
    """One stage is a single plan, whose finds are had in another way."""
    single = read_plan("hypergeometric | lot 800 | n 50 | misses 0.1 | false-alarms 0.01 | reject x>=3")
    stage = read_plan(
        "hypergeometric | lot 800 | stages 50 | misses 0.1 | false-alarms 0.01 | accept 2 | reject 3"
    )
    for defectives in (0, 1, 8, 40, 400, 800):
        assert power(stage, defectives) == pytest.approx(power(single, defectives), rel=1e-11)
        assert not_rejected(stage, defectives) == pytest.approx(not_rejected(single, defectives), rel=1e-11)


@pytest.mark.parametrize("seed", range(30))
def test_condemned_items(seed: int) -> None:
    """Means and variances of the two binomial counts, and chances that add up to 1."""
    draw = random.Random(seed)
    lot = round(10 ** draw.uniform(0.5, 4))
    misses, false_alarms = draw.uniform(0, 0.6), draw.choice([0.0, draw.uniform(0, 0.3)])
    rates = np.array(sorted(draw.sample(range(lot + 1), min(lot, 5))), dtype=float)
    counts, chances = condemned_items(lot, rates, misses, false_alarms)
    assert chances.sum(axis=1) == pytest.approx(1.0, rel=1e-12)
    mean = chances @ counts
    assert mean == pytest.approx(rates * (1 - misses) + (lot - rates) * false_alarms, rel=1e-11)
    variance = chances @ counts**2 - mean**2
    wanted = rates * misses * (1 - misses) + (lot - rates) * false_alarms * (1 - false_alarms)
    assert variance == pytest.approx(wanted, rel=1e-6, abs=1e-6)


@given(
    text=st.sampled_from(ALL), misses=st.floats(0, 0.6), false_alarms=st.floats(0, 0.3), d=st.integers(0, 200)
)
def test_chances_add_up_and_rise(text: str, misses: float, false_alarms: float, d: int) -> None:
    plan = with_fields(read_plan(text), "misses", misses=misses, false_alarms=false_alarms)
    rate = d / 200
    assert power(plan, rate) + not_rejected(plan, rate) == pytest.approx(1, rel=1e-11)
    assert power(plan, rate) <= power(plan, min(d + 1, 200) / 200) * (1 + 1e-11)


@pytest.mark.parametrize("text", [ITEMS, UNITS, LOT])
def test_p_values_and_limits(text: str) -> None:
    plan = read_plan(text)
    for observed in ("0", "2+1", "2+3", "1+1", "1+2"):
        if not decide(plan, observed.partition("+")[0]).startswith("take") and "+" in observed:
            continue
        p = p_value(plan, observed)
        lower, upper = (limit(plan, observed, end, "95%") for end in ("lower", "upper"))
        assert plan.claim is not None and lower <= upper
        assert (p <= 0.05) == (lower > plan.claim.value)


def test_what_would_be_wrong_is_refused() -> None:
    for text in ALL:
        with pytest.raises(NoAnswer, match="no closed form for the power over an uncertain rate"):
            assurance(read_plan(text), 1, 1)
        assert kind_of(read_plan(text)).algebra(read_plan(text)) is None
    lot = read_plan(LOT)
    assert kind_of(lot).native(lot, "B2") is None
    formula = kind_of(read_plan(ITEMS)).native(read_plan(ITEMS), "B2")
    assert formula is not None and "0.01+0.89*B2" in formula
