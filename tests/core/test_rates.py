"""Rates at which power reaches a target, against the inverted laws of scipy and against exact arithmetic."""

from __future__ import annotations

import math
import random
from fractions import Fraction

import brute_sizes as brute
import mpmath
import numpy as np
import pytest
from scipy import special  # noqa: TID251 - an independent inverse

import steelyard.core.kinds  # noqa: F401 - registers them
from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import typed
from steelyard.core.questions import power
from steelyard.core.rates import rate_for, rates_for
from steelyard.core.text import read_plan

TARGETS = (1e-6, 0.01, 0.05, 0.1, 0.5, 0.8, 0.9, 0.95, 0.999, 0.999999)


def inverse(lower, upper, *shape: float, target: float) -> float:
    """Return where a tail reaches the target as typed, from the smaller of target and complement."""
    return float(lower(*shape, target) if target <= 0.5 else upper(*shape, float(1 - typed(target))))


def close_to(rate: float, expected: float) -> bool:
    return math.isclose(rate, expected, rel_tol=2e-12)


@pytest.mark.parametrize("target", TARGETS)
@pytest.mark.parametrize(
    ("n", "c"), [(1, 1), (13, 2), (50, 4), (80, 80), (1000, 1), (5000, 60), (100_000, 6)]
)
def test_binomial_against_the_inverse_beta(n: int, c: int, target: float) -> None:
    rises = rate_for(read_plan(f"binomial | n {n} | reject x>={c}"), target)
    falls = rate_for(read_plan(f"binomial | n {n} | reject x<={c - 1}"), target)
    inverses = special.betaincinv, special.betainccinv
    assert close_to(rises, inverse(*inverses, c, n - c + 1, target=target))
    assert close_to(falls, inverse(*inverses[::-1], c, n - c + 1, target=target))


@pytest.mark.parametrize("target", TARGETS)
@pytest.mark.parametrize(("units", "c"), [(1, 1), (120, 11), (0.25, 3), (10_000, 200)])
def test_poisson_against_the_inverse_gamma(units: float, c: int, target: float) -> None:
    rises = rate_for(read_plan(f"poisson | units {units} | reject x>={c}"), target)
    falls = rate_for(read_plan(f"poisson | units {units} | reject x<={c - 1}"), target)
    inverses = special.gammaincinv, special.gammainccinv
    assert close_to(rises, inverse(*inverses, c, target=target) / units)
    assert close_to(falls, inverse(*inverses[::-1], c, target=target) / units)


@pytest.mark.parametrize(
    ("n", "c", "target"), [(50, 4, 0.95), (20, 1, 0.05), (800, 30, 0.9), (46_372, 6, 0.9), (50, 4, 0.999999)]
)
def test_the_rate_is_right_to_twelve_digits(n: int, c: int, target: float) -> None:
    """Against 40-digit roots, the target taken as typed."""
    found = rate_for(read_plan(f"binomial | n {n} | reject x>={c}"), target)

    def excess(p: mpmath.mpf) -> mpmath.mpf:
        return mpmath.betainc(c, n - c + 1, 0, p, regularized=True) - mpmath.mpf(str(target))

    with mpmath.workdps(40):
        assert abs(found / mpmath.findroot(excess, found) - 1) < 1e-12


def test_the_power_there_is_reached_and_just_before_it_is_not() -> None:
    rng = random.Random(3)
    for _ in range(150):
        n = rng.randint(2, 3000)
        c = rng.randint(1, n)
        target = rng.choice((round(rng.uniform(0.001, 0.999), 3), 0.5, 0.9))
        plan = read_plan(f"binomial | n {n} | reject x>={c}")
        rate = rate_for(plan, target)
        assert power(plan, rate) >= target * (1 - 1e-13)
        assert power(plan, rate * (1 - 1e-10)) < target


@pytest.mark.parametrize("claim", ["| claim p=0.5 | alpha 0.05 ", ""])
def test_both_sides_of_a_bathtub(claim: str) -> None:
    plan = read_plan(f"binomial | n 80 {claim}| reject x<=30 or x>=50")
    upper, lower = rate_for(plan, 0.9, "upper"), rate_for(plan, 0.9, "lower")
    assert close_to(upper, 1 - lower)
    assert close_to(special.betainc(50, 31, upper) + special.betaincc(31, 50, upper), 0.9)


@pytest.mark.parametrize(
    ("text", "lowest"),
    [
        # p/(1-p) = (C(79,30)/C(79,49))^(1/19), and the same for other ends
        ("binomial | n 80 | reject x<=30 or x>=50", 0.5),
        ("binomial | n 20 | reject x<=0 or x>=7", 1 / (1 + math.comb(19, 6) ** (1 / 6))),
        # mean = (11!/3!)^(1/8)
        ("poisson | units 40 | reject x<=3 or x>=12", (math.factorial(11) / 6) ** (1 / 8) / 40),
    ],
)
def test_the_valley_of_a_rule_without_a_claim(text: str, lowest: float) -> None:
    plan = read_plan(text)
    least = power(plan, lowest)
    assert power(plan, lowest * 1.0001) > least < power(plan, lowest * 0.9999)
    lower, upper = (rate_for(plan, least * 1.001, end) for end in ("lower", "upper"))
    assert lower < lowest < upper
    with pytest.raises(InvalidValue, match="power must be greater than the plan's least power"):
        rate_for(plan, least * 0.999, "upper")


def test_lots_give_the_first_whole_number_exactly() -> None:
    """Against a search through every D; about half of the targets are met exactly by some D."""
    rng = random.Random(5)
    for _ in range(200):
        lot = rng.randint(3, 60)
        n = rng.randint(2, lot)
        low, high = sorted(rng.sample(range(-1, n + 2), 2))
        if not 2 <= high - low < n + 2:
            continue
        laws = [brute.hypergeometric(lot, defectives, n) for defectives in range(lot + 1)]
        chances = [Fraction(brute.power(law, low, high), law.total) for law in laws]
        target = float(rng.choice(chances)) if rng.random() < 0.5 else round(rng.uniform(0.01, 0.99), 2)
        wanted, least = typed(target), chances.index(min(chances))
        if not chances[least] * (1 + Fraction(1, 10**12)) < wanted < 1:
            continue
        ends = [*([f"x<={low}"] if low >= 0 else []), *([f"x>={high}"] if high <= n else [])]
        plan = read_plan(f"hypergeometric | lot {lot} | n {n} | reject {' or '.join(ends)}")
        if high <= n:
            upper = rate_for(plan, target, "upper")
            assert upper == next(d for d in range(least, lot + 1) if chances[d] >= wanted)
        if low >= 0:
            lower = rate_for(plan, target, "lower")
            assert lower == next(d for d in range(least, -1, -1) if chances[d] >= wanted)


def test_a_tie_in_a_lot_is_met() -> None:
    """3/60 is the target 0.05 exactly, which floats miss."""
    assert rate_for(read_plan("hypergeometric | lot 60 | n 3 | reject x>=1"), 0.05) == 1


def test_many_plans_and_targets_at_once() -> None:
    plans = [
        read_plan(text)
        for text in (
            "binomial | n 50 | reject x>=4",
            "binomial | n 80 | claim p=0.5 | reject x<=30 or x>=50",
            "poisson | units 120 | reject x>=11",
            "hypergeometric | lot 60 | n 32 | reject x>=1",
            "binomial | n 59 | reject x<=0",
        )
    ]
    found = rates_for(plans, [0.05, 0.5, 0.9])
    assert np.isnan(found[1]).all()  # no end was named
    for row in (0, 2, 3, 4):
        assert found[row].tolist() == [rate_for(plans[row], target) for target in (0.05, 0.5, 0.9)]


ONE_END, TWO_ENDS = "n 50 | reject x>=4", "n 80 | claim p=0.5 | reject x<=30 or x>=50"


@pytest.mark.parametrize(
    ("text", "target", "end", "message"),
    [
        (
            ONE_END,
            0.9,
            "lower",
            "end must be upper: the plan rejects nothing at the other end, but got lower",
        ),
        (
            TWO_ENDS,
            0.9,
            None,
            "end must be lower or upper for a plan that rejects at both ends, but got nothing",
        ),
        (TWO_ENDS, 0.9, "uper", "end must be one of lower, upper, but got uper (did you mean upper?)"),
        (TWO_ENDS, 0.03, "upper", "power must be greater than the plan's size 0.0329926, but got 0.03"),
        (ONE_END, 90, None, "power must lie between 0 and 1, but got 90 (type 90% or 0.9)"),
    ],
)
def test_refusals(text: str, target: float, end: str | None, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        rate_for(read_plan(f"binomial | {text}"), target, end)
    assert str(refusal.value).startswith(message)
