"""Three-class plans, against published chances, every result of a small sample, and fifty digits."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import product
from math import comb

import mpmath
import numpy as np
import published
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.addin import SY_ACCEPTANCE, SY_POWER
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, p_value
from steelyard.core.kind import kind_of
from steelyard.core.outgoing import average_sample
from steelyard.core.plan import Claim, JointClaim
from steelyard.core.questions import acceptance, beta, critical, not_rejected, power, region, size
from steelyard.core.rates import rate_for
from steelyard.core.review import check, sentences
from steelyard.core.rivals import crossing
from steelyard.core.text import read_plan, write_plan

PLAN = "three-class | n 5 | claim bad<=0.001 and marginal<=0.05 | alpha 0.05 | reject bad>=1 or marginal>=2"
LARGE = "three-class | n 60 | reject bad>=2 or marginal>=5"


@pytest.mark.parametrize(
    ("text", "canonical"),
    [
        (PLAN, PLAN),
        (LARGE, LARGE),
        ("THREE-CLASS|Reject marginal≥2 OR bad≥1|alpha 5%|n 5|claim BAD<=0.1% and Marginal<=5%", PLAN),
        ("three-class | n 5 | reject marginal>=3 | verdict pass", None),
        ("three-class | n 5 | reject bad>=3", None),
    ],
)
def test_texts(text: str, canonical: str | None) -> None:
    plan = read_plan(text)
    assert write_plan(plan) == (canonical or text)
    assert read_plan(write_plan(plan)) == plan


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("three-class | n 5", "reject must be written in the plan, e.g. reject bad>=1 or marginal>=2"),
        (
            "three-class | n 5 | reject bad>1",
            "reject must have the form bad>=1 or marginal>=2, but got bad>1",
        ),
        ("three-class | n 5 | reject bad>=1 or bad>=2", "reject must have the form bad>=1 or marginal>=2"),
        ("three-class | n 5 | reject bad>=6", "reject must name from 1 to 5 bad items, but got bad>=6"),
        ("three-class | n 5 | reject marginal>=0", "reject must name from 1 to 5 marginal items"),
        ("three-class | n 9999 | reject bad>=1001", "reject must name at most 1000 bad items"),
        (
            "three-class | n 5 | claim bad<=1% | reject bad>=1",
            "claim must have the form bad<=0.1% and marginal<=5%, but got bad<=1%",
        ),
        (
            "three-class | n 5 | claim bad<=1% and marginal>=5% | reject bad>=1",
            "claim must limit both rates with <=, but got marginal>=5%",
        ),
        (
            "three-class | n 5 | claim bad<=60% and marginal<=50% | reject bad>=1",
            "bad and marginal must add up to at most 1, but got 0.6 and 0.5",
        ),
        ("three-class | n 5 | claim bad<=6 and marginal<=5% | reject bad>=1", "bad must lie between 0 and 1"),
    ],
)
def test_slips_are_named(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    assert str(refusal.value).startswith(message)


@pytest.mark.parametrize(
    ("key", "bad", "marginal"), [("A-K02-01", 0, 0.2), ("A-K02-02", 0.1, 0.2), ("A-K02-03", 0.2, 0.1)]
)
def test_published_acceptance(key: str, bad: float, marginal: float) -> None:
    """Read in the annex of the Czech Ministry of Health's Decree 294/1997 Coll., Table 4."""
    published.agrees(key, acceptance(read_plan(PLAN), bad, marginal))


@pytest.mark.parametrize(("bad", "marginal"), [(0, 0), (0.01, 0.1), (0.2, 0.3), (0.5, 0.5), (1, 0), (0, 1)])
def test_chances_agree_with_scipy(bad: float, marginal: float) -> None:
    """scipy.stats.multinomial, summed over the results that are accepted."""
    plan, law = read_plan(LARGE), stats.multinomial(60, [bad, marginal, 1 - bad - marginal])
    total = sum(law.pmf([b, m, 60 - b - m]) for b in range(2) for m in range(5))
    assert not_rejected(plan, bad, marginal) == pytest.approx(total, rel=1e-11, abs=1e-300)
    assert power(plan, bad, marginal) == pytest.approx(1 - total, rel=1e-11, abs=1e-15)


@pytest.mark.parametrize("rule", ["bad>=1 or marginal>=2", "bad>=3 or marginal>=2", "bad>=2", "marginal>=3"])
def test_every_result_of_six_items(rule: str) -> None:
    plan = read_plan(f"three-class | n 6 | reject {rule}")
    bad, marginal = Fraction(1, 8), Fraction(1, 4)
    total = Fraction(0)
    for items in product("bmg", repeat=6):
        counts = items.count("b"), items.count("m")
        if plan.rule.bad is not None and counts[0] >= plan.rule.bad:
            rejects = True
        else:
            rejects = plan.rule.marginal is not None and counts[1] >= plan.rule.marginal
        chance = bad ** counts[0] * marginal ** counts[1] * (1 - bad - marginal) ** (6 - sum(counts))
        total += chance * rejects
    assert power(plan, 0.125, 0.25) == pytest.approx(float(total), rel=1e-14)
    assert not_rejected(plan, 0.125, 0.25) == pytest.approx(float(1 - total), rel=1e-14)


@pytest.mark.parametrize("seed", range(60))
def test_chances_to_ten_digits(seed: int) -> None:
    """Domain: n to 1,000, rates 1e-7 to 0.5 each that leave at least a tenth of good items."""
    draw = random.Random(seed)
    n = round(10 ** draw.uniform(0.5, 3))
    bad, marginal = 0.45 * 10 ** draw.uniform(-6, 0), 0.45 * 10 ** draw.uniform(-6, 0)
    most = (
        min(n, round(n * bad + draw.uniform(0, 8) * (n * bad) ** 0.5) + 1),
        min(n, round(n * marginal + draw.uniform(-3, 8) * (n * marginal) ** 0.5) + 1),
    )
    rule = f"bad>={most[0]} or marginal>={max(most[1], 1)}"
    plan = read_plan(f"three-class | n {n} | reject {rule}")
    with mpmath.workdps(50):
        good = 1 - mpmath.mpf(bad) - mpmath.mpf(marginal)
        accepted = mpmath.mpf(0)
        for b in range(plan.rule.bad):
            for m in range(min(plan.rule.marginal, n - b + 1)):
                ways = comb(n, b) * comb(n - b, m)
                accepted += ways * mpmath.mpf(bad) ** b * mpmath.mpf(marginal) ** m * good ** (n - b - m)
        for found, exact in (
            (not_rejected(plan, bad, marginal), accepted),
            (power(plan, bad, marginal), 1 - accepted),
        ):
            if exact > mpmath.mpf("1e-30"):
                assert abs(found / exact - 1) < 1e-10


@given(
    rule=st.sampled_from(
        ["bad>=1 or marginal>=2", "bad>=3 or marginal>=2", "bad>=2 or marginal>=9", "bad>=4"]
    ),
    bad=st.floats(0, 0.3),
    marginal=st.floats(0, 0.3),
    more=st.floats(0, 0.3),
)
def test_the_size_lies_at_the_corner(rule: str, bad: float, marginal: float, more: float) -> None:
    plan = read_plan(f"three-class | n 20 | claim bad<=0.3 and marginal<=0.3 | reject {rule}")
    chance = power(plan, bad, marginal)
    assert chance <= power(plan, min(bad + more, 0.3), marginal) * (1 + 1e-12) + 1e-15
    assert chance <= power(plan, bad, min(marginal + more, 0.3)) * (1 + 1e-12) + 1e-15
    assert chance <= size(plan) * (1 + 1e-12)


def test_the_size_is_the_power_at_both_limits() -> None:
    plan = read_plan(PLAN)
    assert plan.claim == JointClaim("bad", "<=", 0.001, also=Claim("marginal", "<=", 0.05))
    assert size(plan) == power(plan, 0.001, 0.05) == pytest.approx(0.0275124887, abs=5e-11)
    assert check(plan) == "ok"
    assert check(read_plan(PLAN.replace("alpha 0.05", "alpha 0.02"))) == "size 2.751 % exceeds alpha 2 %"
    assert beta(plan, 0.001, 0.2) == pytest.approx(not_rejected(plan, 0.001, 0.2), rel=1e-15)
    with pytest.raises(NoAnswer, match=r"the claim bad<=0.001 and marginal<=0.05 is true at 0.001 and 0.05"):
        beta(plan, 0.001, 0.05)


@pytest.mark.parametrize(
    ("observed", "decision"),
    [
        ("bad 0 marginal 1", "not rejected: pass"),
        ("bad 1 marginal 0", "claim rejected: fail"),
        ("BAD = 0, Marginal = 2", "claim rejected: fail"),
    ],
)
def test_decisions(observed: str, decision: str) -> None:
    assert decide(read_plan(PLAN), observed) == decision


@pytest.mark.parametrize(
    ("observed", "message"),
    [
        (1, "observed must have the form bad 0 marginal 1, but got 1"),
        ("bad 1", "observed must have the form bad 0 marginal 1, but got bad 1"),
        ("bad 3 marginal 3", "observed must be at most 5 items together, but got bad 3 marginal 3"),
    ],
)
def test_impossible_results_are_refused(observed: object, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        decide(read_plan(PLAN), observed)
    assert str(refusal.value) == message


def test_what_has_no_meaning_is_refused() -> None:
    plan = read_plan(PLAN)
    with pytest.raises(NoAnswer, match="a plan of kind three-class has no p-value"):
        p_value(plan, "bad 0 marginal 1")
    with pytest.raises(NoAnswer, match="no single critical value"):
        critical(plan)
    with pytest.raises(NoAnswer, match="depends on bad and marginal, so no single rate answers this"):
        rate_for(plan, 0.9)
    with pytest.raises(NoAnswer, match="depends on bad and marginal, so no single rate answers this"):
        crossing(plan, plan)


def test_sentences_and_algebra() -> None:
    plan = read_plan(PLAN)
    told = sentences(plan)
    assert told[1] == "Claim: rate of bad items at most 0.1 %, and rate of marginal items at most 5 %."
    assert told[2].startswith(
        "Rule: the claim is rejected, and the lot fails, on 1 or more bad items, or 2 or more"
    )
    assert all(len(sentence) <= 255 for sentence in told)
    assert region(plan) == "bad ≥ 1 or marginal ≥ 2"
    assert kind_of(plan).algebra(plan) == "1 - sum(C(5,k) marginal^k (1-bad-marginal)^(5-k), k=0..1)"
    assert average_sample(plan, 0.1, 0.2) == 5


def test_a_table_over_both_rates() -> None:
    table = SY_ACCEPTANCE(PLAN, [[0.0], [0.1]], [[0.2, 0.95, "5%"]])
    assert table[0][0] == pytest.approx(0.73728, rel=1e-12)
    assert table[1][1] == "SY: bad and marginal must add up to at most 1, but got 0.1 and 0.95"
    assert table[1][2] == SY_ACCEPTANCE(PLAN, 0.1, 0.05)
    assert SY_POWER(PLAN, 0.1) == "SY: rates must be given for bad and marginal, but got 0.1"
    plans = [
        [PLAN],
        [LARGE],
        ["three-class | n 5 | reject marginal>=3"],
        ["three-class | n 5 | reject bad>=3"],
    ]
    found = SY_POWER(plans, 0.1, 0.2)
    assert [row[0] for row in found] == [SY_POWER(plan, 0.1, 0.2) for (plan,) in plans]
    assert np.array(found, dtype=float).min() > 0
