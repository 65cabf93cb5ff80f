"""Confidence limits against the definition: the set of rates whose p-value exceeds 1 - confidence."""

from __future__ import annotations

import math
import random
from fractions import Fraction

import brute
import mpmath
import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.core.evidence import limit, p_value
from steelyard.core.kinds.binomial import Items
from steelyard.core.kinds.hypergeometric import LotSample
from steelyard.core.kinds.poisson import Extent
from steelyard.core.numbers import typed
from steelyard.core.plan import RELATIONS, SPLITS, Claim, Plan, Reject
from steelyard.core.regions import make_plan
from steelyard.core.text import read_plan

ASKED = [("one-sided", "half"), *(("either", split) for split in SPLITS)]
CONFIDENCES = (0.5, 0.8, 0.9, 0.95, 0.99)
NEAR = Fraction(1, 10**11)


def asked(kind: str, design: object, side: str, split: str) -> Plan:
    """Return a plan that only serves to ask for limits: its rule is that of its split at some level."""
    symbol = {"binomial": "p", "poisson": "rate", "hypergeometric": "D"}[kind]
    if side == "one-sided":
        return Plan(kind, design, Reject(None, 1.0), Claim(symbol, "<=", 0.0))
    return Plan(kind, design, Reject(None, 1.0), Claim(symbol, "=", 0.0), split=split)


def side_of(side: str, end: str) -> str:
    """Return the test that a limit inverts: a lower limit rejects the rates that are too small."""
    return side if side == "either" else {"lower": "above", "upper": "below"}[end]


@pytest.mark.parametrize(("side", "split"), ASKED)
def test_limits_for_lots_are_the_ends_of_the_set(side: str, split: str) -> None:
    draw = random.Random(f"{side} {split}")
    for _ in range(120):
        lot = draw.randint(2, 40)
        n = draw.randint(1, lot)
        x, confidence = draw.randint(0, n), draw.choice(CONFIDENCES)
        miss = 1 - typed(confidence)
        laws = {d: brute.hypergeometric(lot, d, n) for d in range(x, lot - n + x + 1)}
        plan = asked("hypergeometric", LotSample(lot, n), side, split)
        for end, extreme in (("lower", min), ("upper", max)):
            test = side_of(side, end)
            inside = [d for d, law in laws.items() if not law.at_most(x, test, split, miss)]
            assert limit(plan, x, end, confidence) == extreme(inside), (lot, n, x, confidence, end)


@pytest.mark.parametrize("kind", ["binomial", "poisson"])
@pytest.mark.parametrize(("side", "split"), ASKED)
def test_limits_for_rates_are_the_ends_of_the_set(kind: str, side: str, split: str) -> None:
    draw = random.Random(f"{kind} {side} {split}")
    for _ in range(40):
        n, confidence = draw.randint(1, 14), draw.choice(CONFIDENCES)
        x = draw.randint(0, n)
        plan = asked(kind, Items(n) if kind == "binomial" else Extent(2.0), side, split)
        for end, outwards in (("lower", -1), ("upper", 1)):
            found = Fraction(limit(plan, x, end, confidence))
            if found in (0, 1):
                assert x in (0, n)
                continue
            miss, test = 1 - typed(confidence), side_of(side, end)
            outside = [
                (found * (1 + outwards * Fraction(draw.random()) / 2)).limit_denominator(500) for _ in "12345"
            ]
            for rate in (found * (1 + outwards * NEAR), *outside):
                if (rate - found) * outwards <= 0:
                    continue
                if rate > 0 and (kind == "poisson" or rate < 1):
                    assert law_at(kind, n, rate).at_most(x, test, split, miss), (n, x, confidence, end, rate)
            inside = found * (1 - outwards * NEAR)
            assert not law_at(kind, n, inside).at_most(x, test, split, miss), (n, x, confidence, end)


def law_at(kind: str, n: int, rate: Fraction) -> brute.Brute:
    rate = rate.limit_denominator(10**14)
    return brute.binomial(n, rate) if kind == "binomial" else brute.poisson(2 * rate, 100)


@pytest.mark.parametrize("confidence", [0.001, 0.5, 0.95, 0.999999])
@pytest.mark.parametrize("n", [3, 50, 100_000])
def test_limits_with_closed_forms_are_exact_to_twelve_digits(n: int, confidence: float) -> None:
    binomial = asked("binomial", Items(n), "one-sided", "half")
    poisson = asked("poisson", Extent(float(n)), "one-sided", "half")
    with mpmath.workdps(50):
        miss = 1 - mpmath.mpf(repr(confidence))
        for found, wanted in (
            (limit(binomial, 0, "upper", confidence), -mpmath.expm1(mpmath.log(miss) / n)),
            (limit(binomial, n, "lower", confidence), miss ** (mpmath.mpf(1) / n)),
            (limit(binomial, 1, "lower", confidence), -mpmath.expm1(mpmath.log1p(-miss) / n)),
            (limit(poisson, 0, "upper", confidence), -mpmath.log(miss) / n),
            (limit(poisson, 1, "lower", confidence), -mpmath.log1p(-miss) / n),
        ):
            assert found == pytest.approx(float(wanted), rel=1e-12, abs=0)


@pytest.mark.parametrize(("n", "x"), [(200, 3), (5000, 40), (100_000, 7)])
@pytest.mark.parametrize("confidence", [0.3, 0.95, 0.9999])
@pytest.mark.parametrize("split", ["half", "nearest"])
def test_limits_agree_with_fifty_digits(n: int, x: int, confidence: float, split: str) -> None:
    plan = asked("binomial", Items(n), "either", split)
    with mpmath.workdps(50):
        miss = 1 - mpmath.mpf(repr(confidence))
        for end in ("lower", "upper"):
            found = limit(plan, x, end, confidence)
            root = mpmath.findroot(lambda p, end=end: excess(n, x, p, miss, end, split), found)
            assert found == pytest.approx(float(root), rel=1e-12, abs=0)


def excess(n: int, x: int, p: mpmath.mpf, miss: mpmath.mpf, end: str, split: str) -> mpmath.mpf:
    """Return the evidence that `x` gives at one end, less 1 - confidence."""
    below = mpmath.fsum(mpmath.binomial(n, k) * p**k * (1 - p) ** (n - k) for k in range(x))
    chance = mpmath.binomial(n, x) * p**x * (1 - p) ** (n - x)
    tail = 1 - below if end == "lower" else below + chance
    return 2 * tail - (chance if split == "nearest" else 0) - miss


def test_split_rarest_returns_the_hull_of_a_set_with_a_hole() -> None:
    plan = make_plan("binomial", Items(30), Claim("p", "=", 0.3), 0.05, "rarest")
    upper = limit(plan, 1, "upper")
    assert upper == pytest.approx(0.17723, abs=1e-5)
    rates = ("0.16", "0.1632", "0.1633", "0.175", "0.1751", "0.1772", "0.1773")
    outside = [
        r for r in rates if brute.binomial(30, Fraction(r)).at_most(1, "either", "rarest", Fraction(1, 20))
    ]
    assert outside == ["0.1633", "0.175", "0.1773"]


def test_split_rarest_at_a_tie_with_one_minus_confidence() -> None:
    # At p = 1/2 the counts 0 and 2 of 2 have the chance 1/2 together: outside, what lies inwards is inside.
    plan = asked("binomial", Items(2), "either", "rarest")
    assert limit(plan, 2, "lower", 0.5) == pytest.approx(0.5, rel=1e-12)
    assert limit(plan, 0, "upper", 0.5) == pytest.approx(0.5, rel=1e-12)


def test_lot_limits_are_whole_defectives() -> None:
    plan = read_plan("hypergeometric | lot 60 | n 32 | claim D<=0 | alpha 0.05 | reject x>=1")
    assert (limit(plan, 0, "upper"), limit(plan, 0, "lower"), limit(plan, 2, "lower")) == (3.0, 0.0, 2.0)


def test_ends_without_a_bound_are_the_parameter_s_own() -> None:
    plan = read_plan("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4")
    assert (limit(plan, 0, "lower"), limit(plan, 50, "upper")) == (0.0, 1.0)


@given(
    n=st.integers(1, 60),
    data=st.data(),
    claim=st.integers(1, 99),
    split=st.sampled_from(["one-sided", "half", "nearest"]),
)
def test_a_claim_is_rejected_exactly_when_it_lies_outside_the_limits(
    n: int, data: st.DataObject, claim: int, split: str
) -> None:
    x, rate, alpha = data.draw(st.integers(0, n)), claim / 100, 0.1
    side = "above" if split == "one-sided" else "either"
    used = "half" if split == "one-sided" else split
    rule = Reject(None, 1.0) if side == "above" else Reject(0.0, float(n) + 1)
    plan = Plan("binomial", Items(n), rule, Claim("p", RELATIONS[side], rate), split=used)
    p = brute.binomial(n, typed(rate)).p_value(x, side, used)
    if p == typed(alpha):
        return  # a limit that is the claim itself, up to rounding
    limits = asked("binomial", Items(n), "one-sided" if side == "above" else side, used)
    inside = limit(limits, x, "lower", 1 - alpha) <= plan.claim.value  # type: ignore[union-attr]
    if side == "either":
        inside = inside and rate <= limit(limits, x, "upper", 1 - alpha)
    assert inside == (p > typed(alpha))


@pytest.mark.parametrize("split", SPLITS)
def test_limits_of_large_samples(split: str) -> None:
    binomial = asked("binomial", Items(10_000_000), "either", split)
    poisson = asked("poisson", Extent(1e9), "either", split)
    lots = asked("hypergeometric", LotSample(1_000_000, 100_000), "either", split)
    for plan, x, centre, spread in (
        (binomial, 3_000_000, 0.3, math.sqrt(0.3 * 0.7 / 1e7)),
        (poisson, 3_000_000, 0.003, math.sqrt(3e6) / 1e9),
        (lots, 30_000, 300_000, math.sqrt(0.3 * 0.7 * 0.9 / 1e5) * 1e6),
    ):
        for end, sign in (("lower", -1), ("upper", 1)):
            assert limit(plan, x, end, "95%") == pytest.approx(centre + sign * 1.96 * spread, abs=spread / 50)


def test_p_value_at_a_limit_is_one_minus_confidence() -> None:
    plan = read_plan("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4")
    lower = limit(plan, 4, "lower", "90%")
    at_limit = Plan("binomial", Items(50), Reject(None, 4.0), Claim("p", "<=", lower))
    assert p_value(at_limit, 4) == pytest.approx(0.1, rel=1e-12)
