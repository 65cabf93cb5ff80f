"""Two rates of defects compared by the conditional exact test."""

from __future__ import annotations

import random

import mpmath
import numpy as np
import published
import pytest
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.addin import SY_POWER, SY_TWO_POISSON
from steelyard.core.errors import InvalidValue
from steelyard.core.evidence import decide, p_value
from steelyard.core.questions import beta, not_rejected, power, region, size
from steelyard.core.review import sentences
from steelyard.core.text import read_plan, write_plan
from steelyard.core.two_sizes import smallest_comparison

PLAN = "two poisson | units 10 and 12 | claim rate2=rate1 | alpha 0.05"


def plan_of(first, second, relation="<=", split=""):
    return read_plan(
        f"two poisson | units {first} and {second} | claim rate2{relation}rate1 | alpha 0.05{split}"
    )


def test_texts():
    assert write_plan(read_plan("TWO poisson|alpha 5%|claim rate2 = rate1|units 10 and 12.0")) == PLAN
    rarest = PLAN + " | split rarest"
    assert write_plan(read_plan(rarest)) == rarest


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (("10 and 12", "10"), "units must have the form 100 and 120, but got 10"),
        (("10 and 12", "0 and 12"), "units must name two numbers above 0 and at most 1000000000, but got 0"),
        (("rate2=rate1", "rate<=0.1"), "claim must compare rate2 with rate1, e.g. rate2<=rate1, but got"),
        ((" | alpha 0.05", " | alpha 0.05 | split nearest"), "split must be half or rarest, but got nearest"),
    ],
)
def test_slips_are_named(change, message):
    with pytest.raises(InvalidValue) as refusal:
        read_plan(PLAN.replace(*change))
    assert str(refusal.value).startswith(message)


def test_published_p_value():
    """Gu, Ng, Tang and Schucany, Biometrical J. 50 (2008), as the row's source says."""
    published.agrees("A-K16-11", p_value(plan_of(54308.7, 51477.5), "30 vs 60"))


@pytest.mark.parametrize(("x", "y"), [(3, 9), (0, 5), (20, 11), (7, 7), (100, 140)])
def test_p_values_agree_with_scipy(x, y):
    for relation, alternative in (("<=", "greater"), (">=", "less"), ("=", "two-sided")):
        split = " | split rarest" if relation == "=" else ""
        plan = plan_of(10, 12, relation, split)
        expected = stats.binomtest(y, x + y, 12 / 22, alternative=alternative).pvalue
        assert p_value(plan, f"{x} vs {y}") == pytest.approx(expected, rel=1e-11)


@pytest.mark.parametrize("relation", [">=", "="])
def test_every_pair_of_counts_summed(relation):
    plan, means = plan_of(3, 5, relation), (2.4, 7.5)
    chance = 0.0
    for x in range(18):
        for y in range(32):
            rejected = decide(plan, f"{x} vs {y}") == "claim rejected: fail"
            if x % 4 == 0:
                assert rejected == (p_value(plan, f"{x} vs {y}") <= 0.05)
            if rejected:
                chance += stats.poisson.pmf(x, means[0]) * stats.poisson.pmf(y, means[1])
    assert power(plan, 0.8, 1.5) == pytest.approx(chance, rel=1e-8, abs=1e-9)
    assert not_rejected(plan, 0.8, 1.5) == pytest.approx(1 - chance, rel=1e-8)


@pytest.mark.parametrize("seed", range(6))
def test_power_to_ten_digits(seed):
    """Domain: up to 5,000 defects expected in either sample, powers from 1e-20; against 50 digits."""
    draw = random.Random(seed)
    first, second = round(draw.uniform(1, 20), 2), round(draw.uniform(1, 20), 2)
    plan = plan_of(first, second)
    rates = [draw.uniform(0, 3) for _ in range(2)]
    with mpmath.workdps(50):
        means = [mpmath.mpf(n) * mpmath.mpf(rate) for n, rate in zip((first, second), rates, strict=True)]
        total = mpmath.mpf(0)
        pmfs = [[mpmath.exp(-m) * m**k / mpmath.factorial(k) for k in range(260)] for m in means]
        tails = np.cumsum(np.array(pmfs[1])[::-1])[::-1]
        for x in range(260):
            y = np.arange(1, 260)
            hits = stats.binom.sf(y - 1, x + y, second / (first + second)) <= 0.05
            if hits.any():
                total += pmfs[0][x] * tails[int(y[hits.argmax()])]
        if total > mpmath.mpf("1e-20"):
            assert abs(power(plan, *rates) / total - 1) < 1e-10


def test_the_size_is_approached_and_never_exceeded():
    for relation in ("<=", "="):
        plan = plan_of(10, 12, relation)
        chances = [power(plan, rate, rate) for rate in (0.1, 1, 10, 100, 400)]
        assert size(plan) == 0.05
        assert max(chances) <= 0.05
        assert chances[-1] > 0.0475


def test_smallest_units():
    plan = smallest_comparison("two poisson", {}, (1, 2), 0.9)
    assert plan.design.units == (28, 28)
    for fewer in range(1, 28):
        assert power(plan_of(fewer, fewer), 1, 2) < 0.9
    assert power(plan, 1, 2) >= 0.9


def test_words():
    plan = read_plan(PLAN)
    assert region(plan).startswith("x2 ≤ 0 of 5; x2 ≤ 0 of 6; x2 ≤ 0 or ≥ 7 of 7")
    assert all(len(sentence) <= 255 for sentence in sentences(plan))
    assert beta(plan, 1, 2) == not_rejected(plan, 1, 2)
    with pytest.raises(InvalidValue, match="rate1 must let at most 5000 defects be expected, but got 501"):
        power(plan, 501, 1)


def test_cells():
    plan = SY_TWO_POISSON(10, 12, 0.05, "either")
    assert plan == PLAN
    assert SY_POWER([[plan]], [[1.0, 1000.0]], 2.0) == [
        [power(read_plan(plan), 1, 2), "SY: rate1 must let at most 5000 defects be expected, but got 1000"]
    ]
