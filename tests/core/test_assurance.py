"""Power over an uncertain rate, against integrals, sums over every lot, and fifty digits."""

from __future__ import annotations

import random
from collections.abc import Callable
from itertools import pairwise
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate, stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.addin import SY_ASSURANCE
from steelyard.core import tails_prior as tails
from steelyard.core.assurance import assurance
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.plan import Plan
from steelyard.core.questions import power
from steelyard.core.text import read_plan

ITEMS = [
    "binomial | n 50 | claim p<=0.02 | reject x>=4",
    "binomial | n 59 | claim p>=0.05 | reject x<=0 | verdict pass",
    "binomial | n 50 | claim p=0.1 | reject x<=1 or x>=10",
    "binomial | stages 50 then 50 | accept 1 then 4 | reject 4 then 5 | claim p<=0.02",
    "binomial | stages 20 then 20 then 20 | accept none then 1 then 3 | reject 3 then 4 then 4 | claim p<=3%",
    "until 3 defectives | claim p<=0.02 | reject inspected<=41",
    "until 1 defective | claim p>=0.02 | reject inspected>=150 | verdict pass",
]
DEFECTS = [
    "poisson | units 120 | claim rate<=0.05 | reject x>=11",
    "poisson | units 12.5 | claim rate>=0.5 | reject x<=1 | verdict pass",
    "poisson | stages 50 then 50 | accept 1 then 4 | reject 4 then 5 | claim rate<=0.02",
]
LOTS = [
    "hypergeometric | lot 200 | n 50 | claim D<=8 | reject x>=4",
    "hypergeometric | lot 200 | n 50 | claim D=20 | reject x<=1 or x>=10",
    "hypergeometric | lot 60 | n 32 | claim D>=3 | reject x<=0 | verdict pass",
    "hypergeometric | lot 200 | stages 20 then 20 | accept 0 then 2 | reject 2 then 3 | claim D<=8",
]


def averaged(plan: Plan, density: Callable[[float], float], edges: list[float]) -> list[float]:
    """Return the chance of a rejection, and of a right one, by integrals between edges and the claim."""
    assert plan.claim is not None
    points = sorted({*edges, plan.claim.value})
    every = right = 0.0
    for low, high in pairwise(points):
        part, _ = integrate.quad(lambda rate: power(plan, rate) * density(rate), low, high, epsabs=1e-13)
        every += part
        right += part if not plan.claim.holds((low + high) / 2) else 0.0
    return [every, right]


@pytest.mark.parametrize(("a", "b"), [(2, 38), (1.5, 10), (30, 400)])
@pytest.mark.parametrize("text", ITEMS)
def test_items_agree_with_an_integral(text: str, a: float, b: float) -> None:
    plan, law = read_plan(text), stats.beta(a, b)
    edges = [float(edge) for edge in law.ppf([1e-14, 1e-6, 0.01, 0.3, 0.7, 0.99, 1 - 1e-9])]
    found = [assurance(plan, a, b, counted) for counted in ("all", "right")]
    assert found == pytest.approx(averaged(plan, law.pdf, [0.0, *edges, 1.0]), rel=1e-8, abs=1e-10)


@pytest.mark.parametrize(("a", "b"), [(2, 38), (20, 60)])
@pytest.mark.parametrize("text", DEFECTS)
def test_defects_agree_with_an_integral(text: str, a: float, b: float) -> None:
    plan, law = read_plan(text), stats.gamma(a, scale=1 / b)
    edges = [float(edge) for edge in law.ppf([1e-14, 1e-6, 0.01, 0.3, 0.7, 0.99, 1 - 1e-9])]
    found = [assurance(plan, a, b, counted) for counted in ("all", "right")]
    assert found == pytest.approx(averaged(plan, law.pdf, [0.0, *edges, 5.0]), rel=1e-8)


@pytest.mark.parametrize(("a", "b"), [(2, 38), (0.5, 10), (30, 400)])
@pytest.mark.parametrize("text", LOTS)
def test_lots_agree_with_a_sum_over_every_lot(text: str, a: float, b: float) -> None:
    """scipy.stats.betabinom for the lots."""
    plan = read_plan(text)
    assert plan.claim is not None
    defectives = np.arange(plan.design.lot + 1)
    chances = stats.betabinom.pmf(defectives, plan.design.lot, a, b)
    rejected = chances * [power(plan, int(count)) for count in defectives]
    false = [not plan.claim.holds(count) for count in defectives]
    assert assurance(plan, a, b) == pytest.approx(rejected.sum(), rel=1e-10)
    assert assurance(plan, a, b, "right") == pytest.approx(rejected[false].sum(), rel=1e-10)


def test_a_uniform_rate_makes_all_counts_alike() -> None:
    """Bayes, 1763: each of 0 to 50 defectives has the chance 1/51. An exponential rate: a geometric law."""
    assert assurance(read_plan("binomial | n 50 | reject x>=4"), 1, 1) == pytest.approx(47 / 51, rel=1e-14)
    assert assurance(read_plan("binomial | n 50 | reject x<=3"), 1, 1) == pytest.approx(4 / 51, rel=1e-14)
    lot = read_plan("hypergeometric | lot 300 | n 50 | reject x>=40")
    assert assurance(lot, 1, 1) == pytest.approx(11 / 51, rel=1e-14)
    units = read_plan("poisson | units 3 | reject x>=5")
    assert assurance(units, 1, 2) == pytest.approx(0.6**5, rel=1e-14)


def test_certainty_is_the_power() -> None:
    """A law that is as narrow as can be told apart: the power at its mean."""
    plan = read_plan("binomial | n 50 | claim p<=0.02 | reject x>=4")
    assert assurance(plan, 1e8, 9e8) == pytest.approx(power(plan, 0.1), rel=1e-6)


@given(text=st.sampled_from([*ITEMS, *LOTS]), a=st.floats(0.05, 50), b=st.floats(0.05, 500))
def test_right_rejections_are_among_all(text: str, a: float, b: float) -> None:
    plan = read_plan(text)
    every, right = assurance(plan, a, b), assurance(plan, a, b, "right")
    assert 0 <= right <= every * (1 + 1e-12) and every <= 1


def beta_binomial(x: int, n: int, a: float, b: float) -> mpmath.mpf:
    if not 0 <= x <= n:
        return mpmath.mpf(0)
    first, second = mpmath.mpf(a), mpmath.mpf(b)
    return mpmath.exp(
        mpmath.loggamma(n + 1) - mpmath.loggamma(x + 1) - mpmath.loggamma(n - x + 1)
        + mpmath.loggamma(first + x) + mpmath.loggamma(second + n - x) - mpmath.loggamma(first + second + n)
        + mpmath.loggamma(first + second) - mpmath.loggamma(first) - mpmath.loggamma(second)
    )  # fmt: skip


def beta_binomial_tail(x: int, n: int, a: float, b: float) -> mpmath.mpf:
    """P(X >= x), by the ratios of neighbouring terms."""
    first, second = mpmath.mpf(a), mpmath.mpf(b)
    term = total = beta_binomial(x, n, a, b)
    for k in range(x, n):
        term *= (n - k) * (first + k) / ((k + 1) * (second + n - k - 1))
        total += term
        if term < total * mpmath.mpf(10) ** -25 and k > n * first / (first + second):
            break
    return total


@pytest.mark.parametrize("seed", range(80))
def test_forecasts_to_ten_digits(seed: int) -> None:
    """Domain: n to 3,000 here, a and b 0.01 to 10,000."""
    draw = random.Random(seed)
    n, a, b = round(10 ** draw.uniform(0, 3.5)), 10 ** draw.uniform(-2, 4), 10 ** draw.uniform(-2, 4)
    mean, share = n * a / (a + b), a / (a + b)
    spread = (n * share * (1 - share) * (a + b + n) / (a + b + 1)) ** 0.5
    x = min(max(0, round(mean + draw.uniform(-9, 9) * spread)), n)
    with mpmath.workdps(40):
        cases = [
            (tails.beta_binomial_pmf(x, n, a, b), beta_binomial(x, n, a, b)),
            (tails.beta_binomial_at_least(x, n, a, b), beta_binomial_tail(x, n, a, b)),
            (tails.beta_binomial_at_most(x, n, a, b), beta_binomial_tail(n - x, n, b, a)),
        ]
        for found, exact in cases:
            if exact > mpmath.mpf("1e-200"):
                assert abs(float(found) / exact - 1) < 1e-11


@pytest.mark.parametrize(
    ("text", "a", "b", "error", "message"),
    [
        (ITEMS[0], 0, 1, InvalidValue, "a must be greater than 0 and at most 1000000000, but got 0"),
        (ITEMS[0], 1, -1, InvalidValue, "b must be greater than 0 and at most 1000000000, but got -1"),
        (
            "binomial | n 50 | misses 0.1 | reject x>=4", 1, 1, NoAnswer,
            "no closed form for the power over an uncertain rate where inspection errs or defects cluster",
        ),
        (
            "normal | n 12 | sigma 0.4 | claim mean>=500 | reject mean<=499.8", 1, 1, NoAnswer,
            "a plan of kind normal has no closed form for its power over an uncertain rate",
        ),
    ],
)  # fmt: skip
def test_refusals(text: str, a: Any, b: Any, error: type[Exception], message: str) -> None:
    with pytest.raises(error) as refusal:
        assurance(read_plan(text), a, b)
    assert str(refusal.value) == message


def test_right_rejections_need_a_claim() -> None:
    with pytest.raises(InvalidValue, match="claim must be written in the plan"):
        assurance(read_plan("binomial | n 50 | reject x>=4"), 1, 1, "right")


def test_cells() -> None:
    assert SY_ASSURANCE(ITEMS[0], 2, 38) == pytest.approx(0.2674317, abs=5e-8)
    assert SY_ASSURANCE(ITEMS[0], 2, 38, "right") == pytest.approx(0.2663868, abs=5e-8)
    assert SY_ASSURANCE(ITEMS[0], 2, 38, "wrong") == "SY: counted must be one of all, right, but got wrong"
