"""Plans for a mean with sigma known."""

from __future__ import annotations

import math
from typing import Any

import continuous as exact
import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - the general reference library of these tests

from steelyard.core import kinds  # noqa: F401 - registers them
from steelyard.core.errors import InvalidValue
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.kind import kind_of
from steelyard.core.making import plan_from_claim, plan_from_rule, smallest_from
from steelyard.core.questions import beta, critical, not_rejected, power, region, size
from steelyard.core.rates import rate_for
from steelyard.core.review import check, sentences
from steelyard.core.table import PlanTable
from steelyard.core.text import read_plan, write_plan

BELOW = "normal | n 12 | sigma 0.4 | claim mean>=500 | alpha 0.05 | reject mean<=499.8100686631404"
EITHER = plan_from_claim("normal", {"n": 12, "sigma": 0.4}, "mean=500", 0.05)


def test_the_text_of_a_plan() -> None:
    assert write_plan(plan_from_claim("normal", {"n": 12, "sigma": 0.4}, "mean>=500", 0.05)) == BELOW
    assert write_plan(read_plan(BELOW.upper().replace("|", " |  "))) == BELOW
    assert read_plan(write_plan(EITHER)) == EITHER
    assert (region(read_plan(BELOW)), critical(read_plan(BELOW))) == (
        "mean ≤ 499.8100686631404",
        499.8100686631404,
    )


@given(
    n=st.integers(1, 100_000),
    sigma=st.floats(1e-3, 1e3),
    claim=st.floats(-1e3, 1e3),
    side=st.sampled_from(["<=", ">=", "="]),
    alpha=st.sampled_from([0.001, 0.01, 0.05, 0.2]),
)
def test_any_plan_reads_back_and_keeps_alpha(
    n: int, sigma: float, claim: float, side: str, alpha: float
) -> None:
    plan = plan_from_claim("normal", {"n": n, "sigma": sigma}, f"mean{side}{claim!r}", alpha)
    assert read_plan(write_plan(plan)) == plan
    assert size(plan) == pytest.approx(alpha, rel=1e-6)  # the critical mean is rounded to a float
    for x in (plan.rule.low, plan.rule.high):
        if x is not None:
            assert decide(plan, x) == "claim rejected: fail"
            assert p_value(plan, x) <= alpha
            inside = math.nextafter(x, claim)
            assert decide(plan, inside) == "not rejected: pass"
            assert p_value(plan, inside) > alpha


def test_power_against_fifty_digits() -> None:
    rng = np.random.default_rng(30)
    for _ in range(300):
        n, sigma, mean = (
            int(10 ** rng.uniform(0, 5)),
            float(10 ** rng.uniform(-3, 3)),
            float(rng.normal() * 100),
        )
        scale = sigma / math.sqrt(n)
        low = mean + float(rng.uniform(-36, 36)) * scale
        plan = read_plan(f"normal | n {n} | sigma {sigma!r} | reject mean<={low!r}")
        with mpmath.workdps(exact.DIGITS):
            z = (mpmath.mpf(low) - mpmath.mpf(mean)) * mpmath.sqrt(n) / mpmath.mpf(sigma)
        assert exact.relative_error(power(plan, mean), exact.normal_tail(z, upper=False)) < 1e-11
        assert exact.relative_error(not_rejected(plan, mean), exact.normal_tail(z, upper=True)) < 1e-11


@pytest.mark.parametrize("mean", [499.0, 499.7, 500.0, 500.1, 501.0])
def test_power_against_the_reference_library(mean: float) -> None:
    law = stats.norm(mean, 0.4 / math.sqrt(12))
    assert power(read_plan(BELOW), mean) == pytest.approx(law.cdf(499.8100686631404), rel=1e-12)
    ends = (EITHER.rule.low, EITHER.rule.high)
    assert power(EITHER, mean) == pytest.approx(law.cdf(ends[0]) + law.sf(ends[1]), rel=1e-12)
    assert not_rejected(EITHER, mean) == pytest.approx(
        law.cdf(ends[1]) - law.cdf(ends[0]), rel=1e-9, abs=1e-15
    )


def test_power_by_simulation() -> None:
    rng = np.random.default_rng(31)
    means = rng.normal(499.7, 0.4, (100_000, 12)).mean(axis=1)
    expected = power(read_plan(BELOW), 499.7)
    error = math.sqrt(expected * (1 - expected) / 100_000)
    assert (means <= 499.8100686631404).mean() == pytest.approx(expected, abs=4 * error)


@pytest.mark.parametrize(
    ("claim", "catch", "alpha", "reach", "n"),
    [
        # NIST/SEMATECH e-Handbook, sec. 7.2.2.2, from memory: (1.645 + 1.645)^2 = 10.8, rounded up
        ("mean<=0", 1.0, 0.05, 0.95, 11),
        # standard textbook cases, from memory: two-sided 5 %, power 80 % and 90 %, shift of half a sigma
        ("mean=0", 0.5, 0.05, 0.8, 32),
        ("mean=0", 0.5, 0.05, 0.9, 43),
        ("mean<=0", 0.5, 0.05, 0.8, 25),
        ("mean>=0", -0.2, 0.01, 0.9, 326),
    ],
)
def test_smallest_plan(claim: str, catch: float, alpha: float, reach: float, n: int) -> None:
    plan = smallest_from("normal", claim, alpha, catch, reach, extra=1.0)
    assert plan.design.n == n
    assert power(plan, catch) >= reach
    smaller = plan_from_claim("normal", {"n": n - 1, "sigma": 1.0}, claim, alpha)
    assert power(smaller, catch) < reach


def test_smallest_plan_with_two_catches_reaches_the_power_at_both() -> None:
    plan = smallest_from("normal", 500, 0.05, "499.7 and 500.5", 0.9, "either", extra=0.4)
    assert min(power(plan, 499.7), power(plan, 500.5)) >= 0.9
    smaller = plan_from_claim("normal", {"n": plan.design.n - 1, "sigma": 0.4}, "mean=500", 0.05)
    assert power(smaller, 499.7) < 0.9


def test_questions() -> None:
    plan = read_plan(BELOW)
    assert rate_for(plan, 0.9) == pytest.approx(
        500 - (1.6448536269514722 + 1.2815515655446004) * 0.4 / math.sqrt(12)
    )
    assert p_value(plan, 499.7) == pytest.approx(stats.norm.cdf(-0.3 / 0.4 * math.sqrt(12)), rel=1e-10)
    assert limit(plan, "mean 499.7 s 0.31", "upper") == pytest.approx(
        499.7 + 1.6448536269514722 * 0.4 / math.sqrt(12)
    )
    assert limit(EITHER, 499.7, "lower", 0.95) == pytest.approx(
        499.7 - 1.959963984540054 * 0.4 / math.sqrt(12)
    )
    assert beta(plan, 499.7) == not_rejected(plan, 499.7)
    assert (check(plan), check(read_plan(BELOW.replace("499.8100686631404", "499.81")))) == (
        "ok",
        "size 4.994 %; alpha 5 % would give mean ≤ 499.8100686631404",
    )
    assert "on a sample mean of 499.81007 or less" in " ".join(sentences(plan))
    outside = plan_from_rule("normal", 12, None, 499.8, "mean>=500", 0.4)
    assert write_plan(outside) == "normal | n 12 | sigma 0.4 | claim mean>=500 | reject mean<=499.8"


def test_a_large_mean_does_not_upset_the_check() -> None:
    assert check(plan_from_claim("normal", {"n": 12, "sigma": 1e-3}, "mean=1000000", 0.05)) == "ok"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "normal | n 12 | claim mean>=500 | reject mean<=499",
            "sigma must be written in the plan, but got nothing",
        ),
        ("normal | n 12 | sigma 0 | reject mean<=499", "sigma must be greater than 0, but got 0"),
        (
            "normal | n 12.5 | sigma 1 | reject mean<=499",
            "n must be a whole number from 1 to 100000, but got 12.5",
        ),
        (
            "normal | n 12 | sigma 1 | claim mean<=500 | reject mean<=499",
            "reject must not lie on the side where the claim mean<=500 is true, but got mean<=499",
        ),
        (
            "normal | n 12 | sigma 1 | claim p<=0.1 | reject mean<=499",
            "claim must be about mean (mean), but got p<=0.1",
        ),
        (
            "normal | n 12 | sigma 1 | reject x<=499",
            "reject must have the form mean>=4.5 or mean<=1 or mean>=9, but got x<=499",
        ),
    ],
)
def test_refusals(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    assert str(refusal.value) == message


@pytest.mark.parametrize("observed", ["s 0.3", "mean abc", True, None, "#N/A", "mean 4 mean", "499.7 s 0.3"])
def test_refused_observations(observed: Any) -> None:
    with pytest.raises(InvalidValue, match=r"^(observed|mean) must "):
        p_value(read_plan(BELOW), observed)


def test_native_formula() -> None:
    assert kind_of(EITHER).native(read_plan(BELOW), "B2") == (
        "_xlfn.NORM.S.DIST((499.8100686631404-B2)*SQRT(12)/0.4,TRUE)"
    )
    assert kind_of(EITHER).native(EITHER, "B2").count("NORM.S.DIST") == 2


def test_a_table_of_rules_with_one_end_and_with_two() -> None:
    plans = [read_plan(BELOW), EITHER, read_plan("normal | n 5 | sigma 2 | reject mean>=7")]
    places, rates = np.arange(3)[:, None], np.array([[7.5, 499.7]])
    found = PlanTable.of(plans).map(lambda kind: kind.reject, places, rates)
    missed = PlanTable.of(plans).map(lambda kind: kind.accept, places, rates)
    for place, plan in enumerate(plans):
        assert found[place].tolist() == [power(plan, 7.5), power(plan, 499.7)]
        assert missed[place].tolist() == [not_rejected(plan, 7.5), not_rejected(plan, 499.7)]
