"""Plans that inspect until so many defectives are found."""

from __future__ import annotations

import math
import random
from fractions import Fraction
from itertools import product

import accuracy
import mpmath
import numpy as np
import published
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - a second implementation, for comparison only

from steelyard.addin import SY_UNTIL
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.forms import keeping_alpha, resized
from steelyard.core.kind import kind_of
from steelyard.core.kinds.until import UNTIL, Until, UntilLaw
from steelyard.core.making import plan_from_rule
from steelyard.core.outgoing import average_sample
from steelyard.core.plan import RELATIONS, Claim, Plan
from steelyard.core.questions import acceptance, not_rejected, power, region, size
from steelyard.core.rates import rate_for
from steelyard.core.regions import make_plan
from steelyard.core.review import check, sentences
from steelyard.core.text import read_plan, write_plan

PLAN = "until 3 defectives | claim p<=0.02 | alpha 0.05 | reject inspected<=41"
MANY = "until 1 defective | claim p>=0.02 | alpha 0.05 | reject inspected>=150 | verdict pass"
LAW = UntilLaw()


@pytest.mark.parametrize(
    ("text", "canonical"),
    [
        (PLAN, PLAN),
        (MANY, MANY),
        ("UNTIL 3 | reject inspected <= 41 | alpha 5% | claim p≤2%", PLAN),
        ("until 1 defectives|verdict pass|claim p>=2%|alpha 5%|reject inspected≥150", MANY),
        ("until 4 defectives | reject inspected<=9 or inspected>=80", None),
    ],
)
def test_texts(text: str, canonical: str | None) -> None:
    assert write_plan(read_plan(text)) == (canonical or text)
    assert read_plan(canonical or text) == read_plan(text)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("until three | reject inspected<=9", "until must be a number, but got three"),
        ("until 0 | reject inspected<=9", "until must be a whole number from 1 to 10000, but got 0"),
        ("until 3 | reject inspected<=2", "reject must name a value from 3, but got inspected<=2"),
        ("until 3 | reject inspected>=3", "reject must leave some outcome that does not reject"),
        ("until 3 | reject x<=20", "reject must have the form inspected>=4 or inspected<=1 or inspected>=9"),
        (
            "until 3 | claim p<=2% | reject inspected>=20",
            "reject must not lie on the side where the claim p<=0.02 is true, but got inspected>=20",
        ),
        (
            "until 3 | claim p>=2% | reject inspected<=20",
            "reject must not lie on the side where the claim p>=0.02 is true, but got inspected<=20",
        ),
        ("until | reject inspected<=20", "until must be written in the plan, but got nothing"),
        ("until 3 | split rarest | reject inspected<=20", "field must be one of until, claim, alpha, reject"),
    ],
)
def test_slips_are_named(text: str, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        read_plan(text)
    assert str(refusal.value).startswith(message)


@pytest.mark.parametrize(
    ("key", "wanted", "rate", "alpha"),
    [("A-K20-11", 6, 0.1, 0.1), ("A-K20-12", 6, 0.5, 0.1)],
    ids=["K20-11", "K20-12"],
)
def test_published_numbers_of_items(key: str, wanted: int, rate: float, alpha: float) -> None:
    """So many items with five failures or fewer are seldom: the sixth then comes later.

    Read in boostorg/math doc/distributions/negative_binomial_example.qbk.
    """
    plan = make_plan("until", Until(wanted), Claim("p", ">=", rate), alpha)
    assert plan.rule.high - 1 == int(published.ROWS[key]["published"])


@pytest.mark.parametrize(
    ("x", "chance", "digits"),
    [(8, 0.17367, 5e-6), (30, 0.99849, 5e-6)],
)
def test_the_fifth_sale_by_a_certain_house(x: int, chance: float, digits: float) -> None:
    """Five sales at 40 % each: by the 8th house 0.17367, by the 30th 0.99849 (from memory)."""
    columns = {"until": np.asarray(5)}
    assert float(LAW.at_most(x, columns, np.array(0.4))) == pytest.approx(chance, abs=digits)


@pytest.mark.parametrize("wanted", [1, 3, 20])
@pytest.mark.parametrize("p", [1e-4, 0.02, 0.5, 1.0])
def test_chances_agree_with_scipy(wanted: int, p: float) -> None:
    """scipy.stats.nbinom counts the good items before the last defective."""
    columns, x = {"until": np.asarray(wanted)}, np.arange(wanted, 40 * wanted, 3)
    law = stats.nbinom(wanted, p)
    assert LAW.at_most(x, columns, np.array(p)) == pytest.approx(law.cdf(x - wanted), rel=1e-10)
    assert LAW.at_least(x, columns, np.array(p)) == pytest.approx(
        law.sf(x - wanted - 1), rel=1e-10, abs=1e-300
    )


def test_every_sequence_counted() -> None:
    """All results of ten items, each with its chance as a fraction: when was the third defective found?"""
    p, most = Fraction(3, 10), 10
    chances = [Fraction(0)] * (most + 2)
    for sequence in product([1, 0], repeat=most):
        chance = p ** sum(sequence) * (1 - p) ** (most - sum(sequence))
        found = [place for place in range(1, most + 1) if sum(sequence[:place]) == 3]
        chances[found[0] if found else most + 1] += chance
    for m in range(3, most + 1):
        few = read_plan(f"until 3 defectives | reject inspected<={m}")
        assert power(few, 0.3) == pytest.approx(float(sum(chances[: m + 1])), rel=1e-14)
        assert not_rejected(few, 0.3) == pytest.approx(float(1 - sum(chances[: m + 1])), rel=1e-13)
        if m > 3:
            many = read_plan(f"until 3 defectives | reject inspected>={m}")
            assert power(many, 0.3) == pytest.approx(float(1 - sum(chances[:m])), rel=1e-13)
        mean = sum(min(place, m) * chance for place, chance in enumerate(chances))
        assert average_sample(few, 0.3) == pytest.approx(float(mean), rel=1e-13)


@pytest.mark.parametrize("seed", range(120))
def test_tails_to_ten_digits(seed: int) -> None:
    """Domain: 1 to 1,000 defectives, rates 1e-6 to 0.9, up to 100,000 items."""
    draw = random.Random(seed)
    wanted, p = round(10 ** draw.uniform(0, 3)), 0.9 * 10 ** draw.uniform(-6, 0)
    spread = math.sqrt(wanted * (1 - p)) / p + 1
    x = min(max(wanted, round(wanted / p + draw.uniform(-5, 9) * spread)), 100_000)
    columns, at = {"until": np.asarray(wanted)}, np.array(p)
    for found, exact in (
        (LAW.at_most(x, columns, at), accuracy.binomial_tail(wanted, x, p, upper=True)),
        (LAW.at_least(x + 1, columns, at), accuracy.binomial_tail(wanted - 1, x, p, upper=False)),
    ):
        if exact > mpmath.mpf("1e-290"):
            assert abs(float(found) / exact - 1) < 1e-10


@given(
    wanted=st.integers(1, 30),
    percent=st.integers(1, 95),
    alpha=st.sampled_from([0.01, 0.05, 0.1, 0.25]),
    side=st.sampled_from(["above", "below", "either"]),
)
def test_rules_are_the_largest_that_keep_alpha(wanted: int, percent: int, alpha: float, side: str) -> None:
    p = percent / 100
    try:
        plan = make_plan("until", Until(wanted), Claim("p", RELATIONS[side], p), alpha)
    except InvalidValue as refusal:
        assert side == "above" and p**wanted > alpha * (1 - 1e-12), refusal
        return
    share, law = (alpha / 2 if side == "either" else alpha), stats.nbinom(wanted, p)
    low, high = plan.rule.low, plan.rule.high
    if low is not None:
        few = [law.cdf(x - wanted) for x in (low, low + 1)]
        assert few[0] <= share * (1 + 1e-10) and few[1] > share * (1 - 1e-10)
    if high is not None:
        many = [law.sf(x - wanted - 1) for x in (high, high - 1)]
        assert many[0] <= share * (1 + 1e-10) and many[1] > share * (1 - 1e-10)
    assert check(plan) == "ok" and size(plan) <= alpha * (1 + 1e-12)
    assert read_plan(write_plan(plan)) == plan


def test_ties_are_decided_exactly() -> None:
    """Half the items are defective: the second is found by the second item with the chance 1/4."""
    plan = make_plan("until", Until(2), Claim("p", "<=", 0.5), 0.25)
    assert plan.rule.low == 2 and p_value(plan, 2) <= 0.25
    plan = make_plan("until", Until(2), Claim("p", ">=", 0.5), 0.5)
    assert plan.rule.high == 4 and p_value(plan, 4) <= 0.5  # three items hold fewer than two with 1/2


@pytest.mark.parametrize("relation", ["<=", ">=", "="])
def test_p_values_decisions_and_limits_agree(relation: str) -> None:
    plan = make_plan("until", Until(4), Claim("p", relation, 0.05), 0.1)
    for x in [4, 10, 20, 30, 34, 35, 60, 100, 130, 150, 151, 152, 153, 154, 170, 300]:
        rejected = decide(plan, x).startswith("claim rejected")
        assert (p_value(plan, x) <= 0.1) == rejected
        lower, upper = (limit(plan, f"{x} inspected 4 found", end, "90%") for end in ("lower", "upper"))
        outside = {"<=": lower > 0.05, ">=": upper < 0.05, "=": not lower <= 0.05 <= upper}[relation]
        assert outside == rejected


def test_limits_are_those_of_the_binomial_law() -> None:
    """Few items: 3 of 41. Many: 2 of 40, as the last item had to be defective."""
    plan = read_plan(PLAN)
    items, one_less = (read_plan(f"binomial | n {n} | claim p<=0.02 | reject x>=4") for n in (41, 40))
    assert limit(plan, 41, "lower", "95%") == limit(items, 3, "lower", "95%")
    assert limit(plan, 41, "upper", "95%") == limit(one_less, 2, "upper", "95%")
    assert limit(plan, 3, "upper", "95%") == 1.0
    single = make_plan("until", Until(1), Claim("p", "<=", 0.02), 0.05)
    assert limit(single, 1, "upper", "95%") == 1.0
    assert limit(single, 1, "lower", "95%") == pytest.approx(0.05, rel=1e-12)


@pytest.mark.parametrize(
    ("text", "observed", "decision"),
    [
        (PLAN, 41, "claim rejected: fail"),
        (PLAN, "41 inspected 3 found", "claim rejected: fail"),
        (PLAN, "42  Inspected 3 FOUND", "not rejected: pass"),
        (PLAN, "20 inspected 2 found", "go on inspecting"),
        (PLAN, "40 inspected 2 found", "go on inspecting"),
        (PLAN, "41 inspected 2 found", "not rejected: pass"),
        (MANY, "148 inspected 0 found", "go on inspecting"),
        (MANY, "149 inspected 0 found", "claim rejected: pass"),
        (MANY, "149 inspected 1 found", "not rejected: fail"),
        ("until 4 | reject inspected<=9 or inspected>=80", "30 inspected 3 found", "go on inspecting"),
        ("until 4 | reject inspected<=9 or inspected>=80", "79 inspected 3 found", "claim rejected: fail"),
        ("until 4 | reject inspected<=9 or inspected>=80", "79 inspected 4 found", "not rejected: pass"),
    ],
)
def test_decisions(text: str, observed: object, decision: str) -> None:
    assert decide(read_plan(text), observed) == decision


@pytest.mark.parametrize(
    ("observed", "message"),
    [
        (2, "observed must be a whole number from 3 to 10000000, but got 2"),
        ("2 inspected 3 found", "observed must have at most 3 found, and no more than inspected"),
        ("40 inspected 4 found", "observed must have at most 3 found, and no more than inspected"),
        ("some inspected", "observed must have the form 40 inspected 3 found, but got some inspected"),
        (None, "observed must be a number, but got nothing"),
    ],
)
def test_impossible_results_are_refused(observed: object, message: str) -> None:
    with pytest.raises(InvalidValue) as refusal:
        decide(read_plan(PLAN), observed)
    assert str(refusal.value).startswith(message)


def test_no_p_value_before_the_end() -> None:
    with pytest.raises(NoAnswer, match="no p-value or limit before 3 defectives are found"):
        p_value(read_plan(PLAN), "41 inspected 2 found")


@pytest.mark.parametrize(
    ("claim", "catch"), [("p<=2%", "6%"), ("p>=2%", "0.5%"), ("p<=30%", "45%"), ("p>=60%", "40%")]
)
@pytest.mark.parametrize("lasting", [False, True])
def test_the_needed_defectives(claim: str, catch: str, lasting: bool) -> None:
    """Every number of defectives around the answer, by scipy.stats.nbinom."""
    plan = make_plan("until", Until(25), UNTIL.read_claim(claim, None), 0.05)
    found = resized(plan, catch, "90%", lasting).design.until
    met = [powerful(plan, wanted, float(catch.rstrip("%")) / 100) for wanted in range(1, found + 60)]
    assert met[found - 1]
    assert all(met[found - 1 :]) and not met[found - 2] if lasting else not any(met[: found - 1])


def powerful(plan: Plan, wanted: int, rate: float) -> bool:
    claim = plan.claim
    assert claim is not None
    try:
        rule = make_plan("until", Until(wanted), claim, 0.05).rule
    except InvalidValue:
        return False
    law = stats.nbinom(wanted, rate)
    chance = law.cdf(rule.low - wanted) if claim.side == "above" else law.sf(rule.high - wanted - 1)
    return bool(chance >= 0.9)


def test_sentences_and_formulas() -> None:
    plan = read_plan(PLAN)
    told = sentences(plan)
    assert told[2].startswith(
        "Rule: the claim is rejected, and the lot fails, on 41 or fewer items inspected;"
    )
    assert region(plan) == "inspected ≤ 41" and all(len(sentence) <= 255 for sentence in told)
    kind = kind_of(plan)
    assert kind.algebra(plan) == "1 - (1-p)^41 - 41 p (1-p)^40 - 820 p^2 (1-p)^39"
    assert kind.native(plan, "B2") == "_xlfn.BETA.DIST(B2,3,39,TRUE)"
    assert kind.native(read_plan(MANY), "B2") == "_xlfn.BINOM.DIST(0,149,B2,TRUE)"
    assert kind.algebra(read_plan(MANY)) is None
    assert "A lot that passes has shown, with confidence 95.07 %: defect rate below 2 %." in sentences(
        read_plan(MANY)
    )


def test_power_and_rates() -> None:
    plan, many = read_plan(PLAN), read_plan(MANY)
    assert power(plan, 0) == 0.0 and power(plan, 1) == 1.0 and acceptance(many, 0) == 1.0
    assert power(plan, rate_for(plan, 0.9)) == pytest.approx(0.9, rel=1e-12)
    assert power(many, rate_for(many, 0.9)) == pytest.approx(0.9, rel=1e-12)
    assert average_sample(many, 0) == 149 and average_sample(plan, 1) == 3


def test_a_rule_from_outside_takes_its_side_from_its_end() -> None:
    few = plan_from_rule("until", 3, None, 40, claim="2%")
    assert write_plan(few) == "until 3 defectives | claim p<=0.02 | reject inspected<=40"
    many = plan_from_rule("until", 1, 150, None, claim=0.02, verdict="pass")
    assert write_plan(many) == "until 1 defective | claim p>=0.02 | reject inspected>=150 | verdict pass"
    both = plan_from_rule("until", 4, 80, 9, claim=0.1)
    assert both.claim is not None and both.claim.side == "either"


def test_cells() -> None:
    assert SY_UNTIL(3, "2%") == PLAN
    assert SY_UNTIL(1, "p>=2%", 0.05, None, "pass") == MANY
    assert SY_UNTIL(1, "20%") == (
        "SY: until must let some number of items reject p<=0.2 at alpha 0.05, but got 1"
        " (about 2 defectives are needed)"
    )
    assert SY_UNTIL(1.5, "2%") == "SY: defectives must be a whole number of at least 1, but got 1.5"
    assert keeping_alpha(read_plan(PLAN)) == read_plan(PLAN)
