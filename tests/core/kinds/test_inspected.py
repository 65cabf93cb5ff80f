"""Plans whose inspection misses defectives and condemns good items, against enumeration and fifty digits."""

from __future__ import annotations

import math
import random
from fractions import Fraction
from itertools import combinations, product

import accuracy
import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.forms import keeping_alpha, plain, resized, with_fields
from steelyard.core.kind import kind_of
from steelyard.core.kinds.inspected import InspectedLotSample
from steelyard.core.law import CountLaw
from steelyard.core.numbers import typed
from steelyard.core.outgoing import outgoing
from steelyard.core.plan import Claim, Plan
from steelyard.core.questions import not_rejected, power, size
from steelyard.core.rates import rate_for
from steelyard.core.regions import make_plan
from steelyard.core.review import check, sentences
from steelyard.core.smallest import smallest_sizes
from steelyard.core.text import read_plan, write_plan

ITEMS = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | misses 0.1 | false-alarms 0.01 | reject x>=4"
DEFECTS = (
    "poisson | units 120 | claim rate<=0.05 | alpha 0.05 | misses 0.2 | false-alarms 0.002 | reject x>=10"
)
LOT = (
    "hypergeometric | lot 800 | n 50 | claim D<=8 | alpha 0.05 | misses 0.1 | false-alarms 0.01 | reject x>=3"
)


@pytest.mark.parametrize(
    "text",
    [
        ITEMS, DEFECTS, LOT,
        "binomial | n 59 | claim p>=0.05 | alpha 0.05 | misses 0.1 | reject x<=0 | verdict pass",
        "binomial | n 80 | claim p=0.5 | alpha 0.05 | misses 0.02 | split rarest | reject x<=30 or x>=50",
        "poisson | units 2.5 | misses 0 | false-alarms 3 | reject x>=9",
        "hypergeometric | lot 60 | n 32 | claim D<=0 | misses 0 | false-alarms 1e-06 | reject x>=1",
    ],
)  # fmt: skip
def test_canonical_texts_are_written_back_as_they_are(text: str) -> None:
    assert write_plan(read_plan(text)) == text


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "binomial | n 50 | false-alarms 1% | reject x>=4",
            "misses must be written in the plan, but got nothing",
        ),
        ("binomial | n 50 | misses 1 | reject x>=4", "misses must be at least 0 and less than 1, but got 1"),
        (
            "binomial | n 50 | misses 0 | false-alarms -0.1 | reject x>=4",
            "false-alarms must be at least 0 and less than 1, but got -0.1",
        ),
        (
            "hypergeometric | lot 60 | n 5 | misses 0.9 | false-alarms 0.1 | reject x>=4",
            "misses and false-alarms must add up to less than 1, but got 1",
        ),
        (
            "hypergeometric | lot 6000 | n 1001 | misses 0.1 | reject x>=4",
            "n must be at most 1000 where inspection of a lot errs, but got 1001",
        ),
        (
            "poisson | units 5 | misses 0 | false-alarms 1e9 | reject x>=4",
            "false-alarms must expect from 0 to 1000000000 false finds in 5 units, but got 1000000000",
        ),
        ("binomial | n 50 | misses 10% | mises 1% | reject x>=4", "field must be one of "),
    ],
)  # fmt: skip
def test_slips_are_named(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    assert str(refusal.value).startswith(message)


def test_the_same_counts_have_another_size() -> None:
    plan = read_plan(ITEMS)
    assert round(size(plain(plan)), 4) == 0.0178
    assert round(size(plan), 5) == 0.05007
    assert check(plan) == "size 5.007 %; alpha 5 % would give x ≥ 5"
    assert check(keeping_alpha(plan)) == "ok"
    told = sentences(plan)
    assert "With perfect inspection a true claim would be rejected with probability 1.776 % at most." in told
    assert all(
        len(sentence) <= 255 for text in (ITEMS, DEFECTS, LOT) for sentence in sentences(read_plan(text))
    )


@pytest.mark.parametrize(("text", "catch"), [(ITEMS, "10%"), (DEFECTS, 0.1), (LOT, "6%")])
def test_the_wanted_power_is_restored(text: str, catch: object) -> None:
    plan = resized(read_plan(text), catch, "90%")
    assert check(plan) == "ok" and size(plan) <= 0.05
    assert power(plan, catch) >= 0.9 > power(resized(plain(plan), catch, "90%"), catch) - 0.1
    amount = kind_of(plan).grammar.extent
    fewer = getattr(plan.design, amount) - 1
    shorter = write_plan(plan).replace(f"{amount} {fewer + 1:g}", f"{amount} {fewer:g}")
    assert power(keeping_alpha(read_plan(shorter)), catch) < 0.9


def test_plans_without_this_form_refuse_it() -> None:
    plan = with_fields(
        read_plan(ITEMS), "misses", misses=0.3
    )  # other errors take the place of the first ones
    assert write_plan(plan) == ITEMS.replace("misses 0.1 | false-alarms 0.01", "misses 0.3")
    with pytest.raises(NoAnswer, match="kind inspected binomial has no form with the field guesses"):
        with_fields(plan, "guesses")
    with pytest.raises(InvalidValue, match="alpha must be written in the plan"):
        keeping_alpha(read_plan("binomial | n 50 | claim p<=0.02 | reject x>=4"))


@pytest.mark.parametrize("p", [0.0, 1e-6, 0.02, 0.3, 1.0])
@pytest.mark.parametrize(("misses", "false_alarms"), [(0.1, 0.01), (0.0, 0.05), (0.4, 0.0)])
def test_items_agree_with_scipy(p: float, misses: float, false_alarms: float) -> None:
    """scipy.stats.binom at the rate found."""
    plan = with_fields(read_plan(ITEMS), "misses", misses=misses, false_alarms=false_alarms)
    found = p * (1 - misses) + (1 - p) * false_alarms
    assert power(plan, p) == pytest.approx(stats.binom.sf(3, 50, found), rel=1e-11)


@pytest.mark.parametrize("rate", [0.0, 0.01, 0.05, 0.2])
def test_defects_agree_with_scipy(rate: float) -> None:
    """scipy.stats.poisson at the rate found."""
    assert power(read_plan(DEFECTS), rate) == pytest.approx(
        stats.poisson.sf(9, 120 * (rate * 0.8 + 0.002)), rel=1e-11
    )


@pytest.mark.parametrize("defectives", [0, 1, 8, 40, 400, 800])
def test_lots_agree_with_scipy(defectives: int) -> None:
    """scipy.stats.hypergeom and binom, convolved item by item."""
    total = 0.0
    for y in range(51):
        caught, alarmed = (stats.binom.pmf(np.arange(51), k, rate) for k, rate in ((y, 0.9), (50 - y, 0.01)))
        total += stats.hypergeom.pmf(y, 800, defectives, 50) * np.convolve(caught, alarmed)[3:].sum()
    assert power(read_plan(LOT), defectives) == pytest.approx(total, rel=1e-9)


def enumerated(lot: int, n: int, defectives: int, misses: Fraction, false_alarms: Fraction) -> list[Fraction]:
    """Return the chances of all finds: every sample of the lot, and every way in which inspection may err."""
    chances = [Fraction(0)] * (n + 1)
    samples = list(combinations([True] * defectives + [False] * (lot - defectives), n))
    for sample in samples:
        for finds in product([True, False], repeat=n):
            chance = Fraction(1, len(samples))
            for defective, found in zip(sample, finds, strict=True):
                rate = 1 - misses if defective else false_alarms
                chance *= rate if found else 1 - rate
            chances[sum(finds)] += chance
    return chances


@pytest.mark.parametrize("defectives", range(7))
def test_lots_agree_with_every_sample_and_every_slip(defectives: int) -> None:
    misses, false_alarms, law = 0.3, 0.15, counted(LOT)
    chances = enumerated(6, 3, defectives, typed(misses), typed(false_alarms))
    row = {"lot": 6, "n": 3, "misses": misses, "false_alarms": false_alarms}
    columns, at = {name: np.asarray(value) for name, value in row.items()}, np.array(float(defectives))
    for x in range(4):
        low, high = sum(chances[: x + 1]), sum(chances[x:])
        assert float(law.exactly(x, columns, at)) == pytest.approx(float(chances[x]), rel=1e-14)
        assert float(law.at_most(x, columns, at)) == pytest.approx(float(low), rel=1e-14)
        assert float(law.at_least(x, columns, at)) == pytest.approx(float(high), rel=1e-14)
        exact = law.exact(row, Fraction(defectives))
        assert exact.compare([(1, "low", x)], low) == 0 == exact.compare([(1, "high", x)], high)
        assert exact.compare([(1, "high", x)], high + Fraction(1, 10**30)) == -1
        assert [exact.compare_counts(x, y) for y in range(4)] == [
            (chances[x] > chance) - (chances[x] < chance) for chance in chances
        ]


def counted(text: str) -> CountLaw:
    law = kind_of(read_plan(text)).law  # type: ignore[attr-defined]
    assert isinstance(law, CountLaw)
    return law


def drawn(count: int, seed: int) -> list[random.Random]:
    return [random.Random(seed * 1000 + k) for k in range(count)]


def assert_close(value: float, exact: mpmath.mpf, bound: float) -> None:
    if exact > mpmath.mpf("1e-290"):
        assert abs(value / exact - 1) < bound


@pytest.mark.parametrize("draw", drawn(250, 1))
def test_items_and_defects_to_ten_digits(draw: random.Random) -> None:
    """Domain: n to 100,000, rates 1e-7 to 0.9, misses 0 to 0.9, false alarms 0 to 0.09; means to 100,000."""
    misses, false_alarms = draw.choice([0.0, draw.uniform(0, 0.9)]), draw.choice([0.0, draw.uniform(0, 0.09)])
    errors = [Fraction(misses), Fraction(false_alarms)]
    n, p = round(10 ** draw.uniform(0.5, 5)), 0.9 * 10 ** draw.uniform(-7, 0)
    found = Fraction(p) * (1 - errors[0]) + (1 - Fraction(p)) * errors[1]
    spread = math.sqrt(n * float(found)) + 1
    x = min(max(round(n * float(found) + draw.uniform(-6, 12) * spread), 1), n - 1)
    fields = {"misses": np.asarray(misses), "false_alarms": np.asarray(false_alarms)}
    items, at = {"n": np.asarray(n), **fields}, np.array(p)
    tails = [(counted(ITEMS), items, accuracy.binomial_tail, (n, found))]
    mean = n * (Fraction(p) * (1 - errors[0]) + errors[1])
    tails.append((counted(DEFECTS), {"units": np.asarray(n), **fields}, accuracy.poisson_tail, (mean,)))
    for law, columns, tail, numbers in tails:
        assert_close(float(law.at_least(x, columns, at)), tail(x, *numbers, upper=True), 1e-10)
        assert_close(float(law.at_most(x, columns, at)), tail(x, *numbers, upper=False), 1e-10)


@pytest.mark.parametrize("draw", drawn(40, 2))
def test_lots_to_ten_digits(draw: random.Random) -> None:
    """Domain: lots to 1,000,000, n to 1,000, any misses and false alarms that add up to less than 1."""
    lot = round(10 ** draw.uniform(1, 6))
    n, defectives = min(lot, round(10 ** draw.uniform(0, 3))), min(lot, round(10 ** draw.uniform(0, 1.6)))
    misses, false_alarms = draw.uniform(0, 0.7), draw.choice([0.0, draw.uniform(0, 0.29)])
    x = draw.randint(0, min(n, defectives + round(4 * n * false_alarms) + 3))
    with mpmath.workdps(50):
        total = mpmath.mpf(0)
        for y in range(min(n, defectives) + 1):
            for caught in range(y + 1):
                chance = accuracy.hypergeometric_pmf(y, lot, defectives, n)
                chance *= mpmath.binomial(y, caught) * (1 - mpmath.mpf(misses)) ** caught
                chance *= mpmath.mpf(misses) ** (y - caught)
                total += chance * good_tail(x - caught, n - y, false_alarms)
    columns = {"lot": np.asarray(lot), "n": np.asarray(n)}
    columns |= {"misses": np.asarray(misses), "false_alarms": np.asarray(false_alarms)}
    assert_close(float(counted(LOT).at_least(x, columns, np.array(float(defectives)))), total, 1e-10)


def good_tail(x: int, n: int, false_alarms: float) -> mpmath.mpf:
    """P(Bin(n, false alarms) >= x)."""
    if x <= 0 or n < x or false_alarms == 0:
        return mpmath.mpf(x <= 0)
    return accuracy.binomial_tail(x, n, false_alarms, upper=True)


@given(
    text=st.sampled_from([ITEMS, DEFECTS, LOT]),
    misses=st.floats(0, 0.6),
    false_alarms=st.floats(0, 0.3),
    defectives=st.integers(0, 800),
)
def test_both_chances_add_up_and_more_defectives_are_found_more_often(
    text: str, misses: float, false_alarms: float, defectives: int
) -> None:
    plan = with_fields(read_plan(text), "misses", misses=misses, false_alarms=false_alarms)
    rate = defectives / 800
    assert power(plan, rate) + not_rejected(plan, rate) == pytest.approx(1, rel=1e-12)
    assert power(plan, rate) <= power(plan, min(defectives + 1, 800) / 800) * (1 + 1e-12)


@given(text=st.sampled_from([ITEMS, DEFECTS, LOT]), rate=st.integers(0, 80))
def test_without_errors_nothing_changes(text: str, rate: int) -> None:
    plan = with_fields(read_plan(text), "misses", misses=0.0)
    assert power(plan, rate / 800) == pytest.approx(power(plain(plan), rate / 800), rel=1e-12, abs=1e-300)


@pytest.mark.parametrize("text", [ITEMS, DEFECTS, LOT])
@pytest.mark.parametrize("side", ["<=", ">=", "="])
def test_p_values_decisions_and_limits_agree(text: str, side: str) -> None:
    plan = with_side(read_plan(text), side)
    for x in range(12):
        rejected = decide(plan, x).startswith("claim rejected")
        assert (p_value(plan, x) <= 0.05) == rejected
        assert plan.claim is not None
        ends = [limit(plan, x, end, "95%") for end in ("lower", "upper")]
        outside = ends[0] > plan.claim.value if side == "<=" else ends[1] < plan.claim.value
        if side == "=":
            outside = not ends[0] <= plan.claim.value <= ends[1]
        assert outside == rejected


def with_side(plan: Plan, relation: str) -> Plan:
    assert plan.claim is not None
    value = plan.claim.value * (6 if relation != "<=" else 1)
    claim = Claim(plan.claim.symbol, relation, value)
    return make_plan(plan.kind, plan.design, claim, 0.05)


def test_limits_map_back_and_clip() -> None:
    plan = read_plan("binomial | n 200 | claim p<=0.02 | misses 0.1 | false-alarms 0.05 | reject x>=20")
    found = limit(read_plan("binomial | n 200 | claim p<=0.02 | reject x>=20"), 24, "upper", "95%")
    assert limit(plan, 24, "upper", "95%") == pytest.approx((found - 0.05) / 0.85, rel=1e-13)
    assert limit(plan, 0, "upper", "95%") == 0.0  # fewer finds than false alarms alone would give
    assert limit(plan, 200, "lower", "95%") == 1.0
    assert limit(plan, 200, "upper", "95%") == 1.0
    defects = read_plan("poisson | units 10 | claim rate<=1 | misses 0.5 | false-alarms 0.1 | reject x>=20")
    assert limit(defects, 0, "lower", "95%") == 0.0
    # 4 finds: 95 % upper limit of the mean 9.1535, Garwood (from memory)
    assert limit(defects, 4, "upper", "95%") == pytest.approx((0.91535 - 0.1) / 0.5, abs=2e-5)


def test_limits_of_lots_search_all_of_the_lot() -> None:
    plan = read_plan("hypergeometric | lot 60 | n 32 | claim D<=0 | misses 0.2 | reject x>=1")
    upper = limit(plan, 0, "upper", "95%")
    assert upper > limit(plain(plan), 0, "upper", "95%") == 3.0
    one_more = [power(plan, count) for count in (upper, upper + 1)]
    assert 1 - one_more[0] > 0.05 >= 1 - one_more[1]


def test_a_tie_is_decided_exactly() -> None:
    """4 of 60 items drawn, one defective, a quarter missed: it is found with the chance 1/15 * 3/4 = 5 %."""
    plan = make_plan("inspected hypergeometric", *tie())
    assert plan.rule.high == 1 and p_value(plan, 1) <= 0.05
    assert size(plan) == pytest.approx(0.05, rel=1e-14)


def tie() -> tuple[InspectedLotSample, Claim, float]:
    return InspectedLotSample(60, 4, 0.25), Claim("D", "<=", 1.0), 0.05


def test_the_power_of_the_truth_is_asked_for() -> None:
    plan = read_plan(ITEMS)
    rate = rate_for(plan, 0.9)
    assert power(plan, rate) == pytest.approx(0.9, rel=1e-12)
    assert rate * 0.9 + (1 - rate) * 0.01 == pytest.approx(rate_for(plain(plan), 0.9), rel=1e-12)


def test_native_formulas_and_algebra_go_by_what_is_found() -> None:
    plan = read_plan("binomial | n 13 | misses 0.1 | false-alarms 0.01 | reject x>=2")
    assert kind_of(plan).native(plan, "B2") == "_xlfn.BETA.DIST((0.01+0.89*B2),2,12,TRUE)"
    assert kind_of(plan).algebra(plan) == "1 - (1-f)^13 - 13 f (1-f)^12, with f = 0.01 + 0.89 p"
    plan = read_plan("poisson | units 120 | misses 0.2 | reject x>=3")
    assert kind_of(plan).native(plan, "B2") == "_xlfn.GAMMA.DIST(120*(0.8*B2),3,1,TRUE)"
    assert kind_of(plan).algebra(plan) == "1 - exp(-120 f) (1 + 120 f + (120 f)^2/2), with f = 0.8 rate"
    lot = read_plan(LOT)
    assert kind_of(lot).native(lot, "B2") is None is kind_of(lot).algebra(lot)


def test_outgoing_quality_is_refused_because_missed_defectives_stay() -> None:
    for text, rate, lot in ((ITEMS, 0.02, 800), (DEFECTS, 0.05, 800), (LOT, 16, None)):
        with pytest.raises(NoAnswer, match="outgoing quality is known for inspection without errors"):
            outgoing(read_plan(text), rate, lot)


def test_many_sizes_at_once_are_refused() -> None:
    with pytest.raises(NoAnswer, match="not for inspected binomial"):
        smallest_sizes("inspected binomial", 0.02, 0.05, 0.1, 0.9)
