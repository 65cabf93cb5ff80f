"""Exact decisions, against plain sums of fractions and of 50-digit numbers, and on ties."""

from __future__ import annotations

from fractions import Fraction
from math import comb, isqrt

import accuracy
import mpmath
import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.core import tails
from steelyard.core.exact import BinomialExact, HypergeometricExact, PoissonExact, Tail

Rational = BinomialExact | HypergeometricExact


def sign(value: Fraction | int) -> int:
    return (value > 0) - (value < 0)


def chance(law: Rational, k: int) -> Fraction:
    """P(X = k) from its textbook formula."""
    if isinstance(law, BinomialExact):
        inside = 0 <= k <= law.n
        return comb(law.n, k) * law.p**k * (1 - law.p) ** (law.n - k) if inside else Fraction(0)
    good = law.lot - law.defectives
    if not 0 <= k <= law.n:
        return Fraction(0)
    return Fraction(comb(law.defectives, k) * comb(good, law.n - k), comb(law.lot, law.n))


@st.composite
def laws(draw: st.DrawFn) -> Rational:
    if draw(st.booleans()):
        return BinomialExact(draw(st.integers(0, 14)), Fraction(draw(st.integers(0, 20)), 20))
    lot = draw(st.integers(0, 30))
    return HypergeometricExact(lot, draw(st.integers(0, lot)), draw(st.integers(0, lot)))


WEIGHTED = st.lists(
    st.tuples(st.integers(0, 2), st.sampled_from(["low", "high"]), st.integers(-2, 16)),
    min_size=1,
    max_size=3,
)
OFFSETS = st.sampled_from(
    [Fraction(0), Fraction(1, 10**30), Fraction(-1, 10**150), Fraction(1, 7), Fraction(-1, 7)]
)


@given(laws(), WEIGHTED, OFFSETS)
def test_weighted_sums_of_tails_near_and_on_a_tie(law: Rational, parts: list[Tail], offset: Fraction) -> None:
    total = sum(
        (
            weight * chance(law, k)
            for weight, end, x in parts
            for k in range(law.n + 1)
            if (k <= x if end == "low" else k >= x)
        ),
        Fraction(0),
    )
    assert law.compare(parts, total + offset) == sign(-offset)


@given(laws(), st.integers(-2, 16), st.integers(-2, 16))
def test_counts_equally_probable_or_not(law: Rational, x: int, y: int) -> None:
    assert law.compare_counts(x, y) == sign(chance(law, x) - chance(law, y))


def test_a_tie_that_floats_miss() -> None:
    """One defective in a lot of 60, three drawn: 3/60 is 5 % exactly."""
    law = HypergeometricExact(60, 1, 3)
    assert law.compare([(1, "high", 1)], Fraction("0.05")) == 0
    assert law.compare([(1, "high", 1)], Fraction(0.05)) == -1  # the float lies above the decimal


def test_ties_of_long_sums() -> None:
    half = Fraction(1, 2)
    assert BinomialExact(99_999, half).compare([(1, "high", 50_000)], half) == 0
    assert BinomialExact(99_999, half).compare([(2, "low", 49_999)], Fraction(1)) == 0
    assert HypergeometricExact(9_998, 4_999, 2_001).compare([(1, "low", 1_000)], half) == 0


@pytest.mark.parametrize(
    ("n", "p", "x"), [(100_000, "0.4321", 43_400), (46_372, "0.00005", 6), (100_000, "0.999", 99_800)]
)
def test_binomial_sides_of_a_close_bound(n: int, p: str, x: int) -> None:
    """The bound differs from the tail, taken at the decimal rate, in the fortieth place."""
    law = BinomialExact(n, Fraction(p))
    with mpmath.workdps(60):
        rate = mpmath.mpf(p)
        log_point = (
            accuracy.log_factorial(n) - accuracy.log_factorial(x) - accuracy.log_factorial(n - x)
            + x * mpmath.log(rate) + (n - x) * mpmath.log(1 - rate)
        )  # fmt: skip
        a, b = Fraction(p).numerator, Fraction(p).denominator
        upward = accuracy.ratio_sum(x, 1, lambda k: ((n - k) * a, (k + 1) * (b - a)))
        tail = accuracy.fraction(mpmath.exp(log_point) * upward)
    assert law.compare([(1, "high", x)], tail - Fraction(1, 10**40)) == 1
    assert law.compare([(1, "high", x)], tail + Fraction(1, 10**40)) == -1
    assert law.compare([(1, "low", x - 1)], 1 - tail - Fraction(1, 10**40)) == 1
    assert law.compare([(1, "low", x - 1)], 1 - tail + Fraction(1, 10**40)) == -1


@pytest.mark.parametrize(("mean", "x"), [(6.0, 11), (0.25, 1), (1000.5, 1100), (1e5, 100_700)])
def test_poisson_sides_of_a_close_bound(mean: float, x: int) -> None:
    law = PoissonExact(Fraction(mean))
    tail = accuracy.fraction(accuracy.poisson_tail(x, mean, True))
    for parts, value in (
        ([(1, "high", x)], tail),
        ([(1, "low", x - 1)], 1 - tail),
        ([(2, "high", x)], 2 * tail),
    ):
        assert law.compare(parts, value - Fraction(1, 10**40)) == 1
        assert law.compare(parts, value + Fraction(1, 10**40)) == -1


def test_poisson_counts() -> None:
    assert PoissonExact(Fraction(3)).compare_counts(2, 3) == 0
    assert PoissonExact(Fraction("0.3")).compare_counts(-1, 0) == -1
    assert PoissonExact(Fraction("2.9999999999999996")).compare_counts(2, 3) == 1
    places = 10**30  # P(4) = P(8) at mean**4 = 8!/4! = 1680, which is no rational's fourth power
    root = isqrt(isqrt(1680 * places**4))
    assert PoissonExact(Fraction(root, places)).compare_counts(4, 8) == 1
    assert PoissonExact(Fraction(root + 1, places)).compare_counts(4, 8) == -1


def test_trivial_sums() -> None:
    law = PoissonExact(Fraction(3))
    assert law.compare([(1, "high", 0)], Fraction(1)) == 0
    assert law.compare([(1, "low", -1)], Fraction(0)) == 0
    assert law.compare([(1, "low", 4), (1, "high", 5)], Fraction(1)) == 0
    assert law.compare([(1, "low", 10**6)], Fraction(1)) == -1
    assert law.compare([(1, "high", 10**6)], Fraction(0)) == 1
    assert PoissonExact(Fraction(0)).compare([(1, "high", 1)], Fraction("0.05")) == -1
    assert PoissonExact(Fraction(0)).compare_counts(0, 1) == 1


@pytest.mark.parametrize("n", [100_000])
def test_floats_and_exact_arithmetic_agree_away_from_the_bound(n: int) -> None:
    law = BinomialExact(n, Fraction("0.02"))
    for x in (2000, 2075, 2150, 2300):
        value = float(tails.binomial_at_least(x, n, 0.02))
        assert law.compare([(1, "high", x)], Fraction(value * 0.999999)) == 1
        assert law.compare([(1, "high", x)], Fraction(value * 1.000001)) == -1
