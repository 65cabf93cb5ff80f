"""Critical regions against the definition, taken literally on every count in exact arithmetic."""

from __future__ import annotations

import math
import random
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import brute
import numpy as np
import pytest

from steelyard.core.abilities import deciding
from steelyard.core.errors import InvalidValue
from steelyard.core.evidence import p_value
from steelyard.core.kind import KINDS, kind_of
from steelyard.core.kinds.binomial import BINOMIAL, Items
from steelyard.core.kinds.hypergeometric import LotSample
from steelyard.core.kinds.poisson import Extent
from steelyard.core.numbers import typed
from steelyard.core.plan import RELATIONS, SPLITS, Claim, Plan, Reject
from steelyard.core.questions import size
from steelyard.core.regions import (
    critical_high,
    critical_low,
    critical_region,
    empty_tails,
    least_amount,
    make_plan,
)
from steelyard.core.splits import ENDS, ONE_SIDED
from steelyard.core.text import read_plan, write_plan
from steelyard.core.threshold import CountKind

CASES, TIES = 2000, 200
ASKED = [("above", "half"), ("below", "half"), *(("either", split) for split in SPLITS)]
LAW: Any = BINOMIAL.law  # type: ignore[attr-defined]
ALPHAS = (0.001, 0.005, 0.01, 0.02, 0.025, 0.05, 0.1, 0.2, 0.3)


@dataclass(frozen=True)
class Case:
    """One plan to be made, and the law that its claim stands for."""

    kind: str
    design: Any
    claim: Claim
    split: str
    law: brute.Brute
    most: int

    def region(self, alpha: float) -> list[int]:
        """Return the counts with a p-value of at most alpha."""
        side, exact = self.claim.side, typed(alpha)
        return [x for x in range(self.most + 1) if self.law.at_most(x, side, self.split, exact)]


def binomial_case(draw: random.Random, small: bool) -> Case:
    n = draw.randint(1, 6 if small else 24)
    p = (
        draw.choice((0.1, 0.2, 0.25, 0.3, 0.4, 0.5, 0.6, 0.75, 0.8, 0.9))
        if small
        else draw.randint(1, 99) / 100
    )
    side, split = draw.choice(ASKED)
    return Case("binomial", Items(n), Claim("p", RELATIONS[side], p), split, brute.binomial(n, typed(p)), n)


def poisson_case(draw: random.Random, small: bool) -> Case:
    del small
    units, rate = draw.choice((0.5, 1.0, 2.5, 4.0)), draw.randint(1, 40) / 20
    side, split = draw.choice(ASKED)
    law = brute.poisson(typed(units) * typed(rate), 70)
    return Case("poisson", Extent(units), Claim("rate", RELATIONS[side], rate), split, law, 32)


def hypergeometric_case(draw: random.Random, small: bool) -> Case:
    lot = draw.randint(2, 30)
    n, defectives = draw.randint(1, min(lot, 4 if small else lot)), draw.randint(0, lot)
    side, split = draw.choice([asked for asked in ASKED if not _always_true(asked[0], defectives, lot)])
    claim = Claim("D", RELATIONS[side], float(defectives))
    return Case(
        "hypergeometric", LotSample(lot, n), claim, split, brute.hypergeometric(lot, defectives, n), n
    )


def _always_true(side: str, defectives: int, lot: int) -> bool:
    return (side == "above" and defectives == lot) or (side == "below" and defectives == 0)


DRAWS = {"binomial": binomial_case, "poisson": poisson_case, "hypergeometric": hypergeometric_case}


def drawn(kind: str) -> Iterator[tuple[Case, float]]:
    """Yield random cases and alphas: at first such that some count's p-value is alpha, or next to it."""
    draw, ties = random.Random(kind), 0
    while ties < TIES:
        case = DRAWS[kind](draw, True)
        p = case.law.p_value(draw.randint(0, case.most), case.claim.side, case.split)
        alpha = float(p)
        if 0 < alpha < 1 and (typed(alpha) == p or kind == "poisson"):
            ties += 1
            yield case, alpha
    for _ in range(CASES - TIES):
        yield DRAWS[kind](draw, False), draw.choice(ALPHAS)


def made(case: Case, alpha: float) -> Plan | InvalidValue:
    try:
        return make_plan(case.kind, case.design, case.claim, alpha, case.split)
    except InvalidValue as refusal:
        return refusal


@pytest.mark.parametrize("kind", DRAWS)
def test_region_is_every_count_with_a_p_value_of_at_most_alpha(kind: str) -> None:
    for number, (case, alpha) in enumerate(drawn(kind)):
        if number >= TIES and number % 9:
            continue
        wanted, plan = case.region(alpha), made(case, alpha)
        if isinstance(plan, InvalidValue):
            assert len(wanted) == (case.most + 1 if plan.name == "alpha" else 0), (case, alpha)
            continue
        rejected = [x for x in range(case.most + 1) if deciding(kind_of(plan)).outcome(plan, x)]
        assert rejected == wanted, (case, alpha)
        assert_p_values_agree(case, plan, wanted)


@pytest.mark.parametrize("kind", DRAWS)
def test_critical_counts_of_many_designs_are_the_ends_of_their_regions(kind: str) -> None:
    groups: dict[tuple[str, str], list[tuple[Case, float]]] = {}
    for case, alpha in drawn(kind):
        groups.setdefault((case.claim.side, case.split), []).append((case, alpha))
    assert sum(map(len, groups.values())) == CASES
    for (side, split), members in groups.items():
        fields = KINDS[kind].grammar.fields
        columns = {
            f.attribute: np.array([getattr(c.design, f.attribute) for c, _ in members]) for f in fields
        }
        rates = np.array([case.claim.value for case, _ in members])
        alphas = np.array([alpha for _, alpha in members])
        shared = split if side == "either" else ONE_SIDED
        law = counted(kind).law
        low = critical_low(law, columns, rates, alphas, shared) if "low" in ENDS[side] else None
        high = critical_high(law, columns, rates, alphas, shared) if "high" in ENDS[side] else None
        for place, (case, alpha) in enumerate(members):
            bottom = -1.0 if low is None or np.isnan(low[place]) else low[place]
            top = math.inf if high is None or np.isnan(high[place]) else high[place]
            found = [x for x in range(case.most + 1) if x <= bottom or x >= top]
            assert found == case.region(alpha), (case, alpha)


def counted(kind: str) -> CountKind:
    found = KINDS[kind]
    assert isinstance(found, CountKind)
    return found


def assert_p_values_agree(case: Case, plan: Plan, wanted: list[int]) -> None:
    """Compare all p-values with the exact ones, and those next to the region's ends with alpha."""
    counts, kind = np.arange(case.most + 1.0), counted(case.kind)
    columns, rate = kind.columns([plan]), np.array(case.claim.value)
    found = kind.law.p_value(columns, rate, counts, case.claim.side, plan.split)
    exact = [float(case.law.p_value(int(x), case.claim.side, case.split)) for x in counts]
    np.testing.assert_allclose(found, exact, rtol=1e-12, atol=1e-300)
    assert plan.alpha is not None
    for end in (plan.rule.low, plan.rule.high):
        for x in () if end is None else (end - 1, end, end + 1):
            if 0 <= x <= case.most:
                assert (p_value(plan, x) <= plan.alpha) == (int(x) in wanted), (case, x)


def test_smallest_amount_that_can_reject_is_the_first_that_does() -> None:
    draw, checked = random.Random(1), 0
    for _ in range(300):
        case = binomial_case(draw, False)
        alpha = draw.choice((0.05, 0.1, 0.01))
        refusal = made(case, alpha)
        if not isinstance(refusal, InvalidValue) or refusal.name != "n":
            continue
        least = int(refusal.rule.removeprefix("be at least ").split()[0])
        if least > 60:
            continue
        for n in range(1, least + 1):
            law = brute.binomial(n, typed(case.claim.value))
            larger = Case(case.kind, Items(n), case.claim, case.split, law, n)
            assert bool(larger.region(alpha)) == (n == least), (case, n)
        checked += 1
    assert checked > 30


@pytest.mark.parametrize("split", SPLITS)
def test_many_designs_at_once_equal_one_by_one(split: str) -> None:
    n = np.array([1.0, 5.0, 20.0, 80.0, 200.0, 1000.0])
    rates = np.array([[0.01], [0.5], [0.97]])
    low = critical_low(LAW, {"n": n}, rates, 0.05, split)
    high = critical_high(LAW, {"n": n}, rates, 0.05, split)
    for i, rate in enumerate(rates[:, 0]):
        for j, items in enumerate(n):
            alone = {"n": np.array(items)}
            for many, find in ((low, critical_low), (high, critical_high)):
                one = find(LAW, alone, rate, 0.05, split)
                assert many[i, j] == one or (math.isnan(many[i, j]) and math.isnan(one))


@pytest.mark.parametrize(
    ("kind", "design", "claim", "alpha", "split", "rule"),
    [
        # 3/60 is alpha exactly, where floats say 0.05000000000000001.
        ("hypergeometric", LotSample(60, 3), Claim("D", "<=", 1.0), 0.05, "half", Reject(None, 1.0)),
        ("binomial", Items(50), Claim("p", "<=", 0.02), 0.05, "half", Reject(None, 4.0)),
        ("binomial", Items(59), Claim("p", ">=", 0.05), 0.05, "half", Reject(0.0, None)),
        ("binomial", Items(80), Claim("p", "=", 0.5), 0.05, "nearest", Reject(31.0, 49.0)),
        ("binomial", Items(80), Claim("p", "=", 0.5), 0.05, "rarest", Reject(30.0, 50.0)),
        ("binomial", Items(50), Claim("p", "=", 0.02), 0.05, "half", Reject(None, 4.0)),
        ("poisson", Extent(120.0), Claim("rate", "<=", 0.05), 0.05, "half", Reject(None, 11.0)),
        ("hypergeometric", LotSample(800, 50), Claim("D", "<=", 8.0), 0.05, "half", Reject(None, 3.0)),
        ("hypergeometric", LotSample(60, 32), Claim("D", "<=", 0.0), 0.05, "half", Reject(None, 1.0)),
        ("binomial", Items(46372), Claim("p", "<=", 0.00005), 0.05, "half", Reject(None, 6.0)),
        ("binomial", Items(52659), Claim("p", "<=", 0.00005), 0.05, "half", Reject(None, 7.0)),
        ("binomial", Items(7), Claim("p", "<=", 0.0), 0.05, "half", Reject(None, 1.0)),
        ("binomial", Items(7), Claim("p", ">=", 1.0), 0.05, "half", Reject(6.0, None)),
        ("poisson", Extent(7.0), Claim("rate", "<=", 0.0), 0.05, "half", Reject(None, 1.0)),
        ("binomial", Items(7), Claim("p", "=", 1.0), 0.05, "rarest", Reject(6.0, None)),
    ],
)
def test_known_regions(kind: str, design: Any, claim: Claim, alpha: float, split: str, rule: Reject) -> None:
    plan = make_plan(kind, design, claim, alpha, split)
    assert plan.rule == rule
    assert critical_region(KINDS[kind], design, claim, alpha, split) == rule
    assert read_plan(write_plan(plan)) == plan


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("hypergeometric | lot 60 | n 3 | claim D<=1 | alpha 0.05 | reject x>=1", 0.05),
        ("hypergeometric | lot 60 | n 32 | claim D<=0 | alpha 0.05 | reject x>=1", 0.0),
        ("binomial | n 80 | claim p=0.5 | alpha 0.05 | split nearest | reject x<=31 or x>=49", 0.0567),
    ],
)
def test_known_sizes(text: str, expected: float) -> None:
    assert size(read_plan(text)) == pytest.approx(expected, rel=1e-3, abs=1e-15)


@pytest.mark.parametrize("claim", [Claim("p", "<=", 1.0), Claim("p", ">=", 0.0)])
def test_claims_that_are_always_true_are_refused(claim: Claim) -> None:
    with pytest.raises(InvalidValue, match=r"^claim must be false for some p, but got p[<>]=[01]$"):
        make_plan("binomial", Items(50), claim, 0.05)


@pytest.mark.parametrize(
    "text",
    [
        "binomial | n 50 | claim p<=1 | reject x>=4",
        "poisson | units 5 | claim rate>=0 | reject x<=0",
        "hypergeometric | lot 60 | n 5 | claim D<=60 | reject x>=4",
        "hypergeometric | lot 60 | n 5 | claim p<=100% | reject x>=4",
        "hypergeometric | lot 60 | n 5 | claim p>=0% | reject x<=4",
    ],
)
def test_plan_texts_whose_claim_is_always_true_are_refused(text: str) -> None:
    with pytest.raises(InvalidValue, match="claim must be false for some"):
        read_plan(text)


@pytest.mark.parametrize(
    ("kind", "design", "claim", "message"),
    [
        (
            "binomial",
            Items(2),
            Claim("p", "<=", 0.5),
            "n must be at least 5 so that some count can reject p<=0.5 at alpha 0.05, but got 2",
        ),
        (
            "binomial",
            Items(2),
            Claim("p", "=", 0.5),
            "n must be at least 6 so that some count can reject p=0.5 at alpha 0.05, but got 2",
        ),
        (
            "poisson",
            Extent(10.0),
            Claim("rate", ">=", 0.05),
            "units must be at least 60 so that some count can reject rate>=0.05 at alpha 0.05, but got 10",
        ),
        (
            "hypergeometric",
            LotSample(60, 2),
            Claim("D", ">=", 3.0),
            "n must be at least 38 so that some count can reject D>=3 at alpha 0.05, but got 2",
        ),
    ],
)
def test_refusal_names_the_smallest_amount_that_can_reject(
    kind: str, design: Any, claim: Claim, message: str
) -> None:
    with pytest.raises(InvalidValue) as refusal:
        make_plan(kind, design, claim, 0.05)
    assert str(refusal.value) == message


def test_refusal_says_so_where_no_amount_can_reject() -> None:
    with pytest.raises(InvalidValue) as refusal:
        make_plan("binomial", Items(50), Claim("p", ">=", 1e-9), 0.05)
    assert str(refusal.value) == (
        "claim must be one that some count can reject at alpha 0.05, but got p>=1e-09"
        " (no n up to 10000000 is enough)"
    )


def test_alpha_at_which_everything_would_reject_is_refused() -> None:
    with pytest.raises(
        InvalidValue, match=r"^alpha must leave some outcome that does not reject, but got 0.5$"
    ):
        make_plan("binomial", Items(1), Claim("p", "=", 0.5), 0.5, "nearest")


@pytest.mark.parametrize(
    ("text", "tails"),
    [
        (
            "binomial | n 50 | claim p=0.02 | alpha 0.05 | reject x>=4",
            ["no low count can reject below n 183"],
        ),
        (
            "binomial | n 50 | claim p=0.98 | alpha 0.05 | reject x<=46",
            ["no high count can reject below n 183"],
        ),
        (
            "poisson | units 10 | claim rate=0.1 | alpha 0.05 | reject x>=4",
            ["no low count can reject below units 37"],
        ),
        ("binomial | n 183 | claim p=0.02 | alpha 0.05 | reject x<=0 or x>=9", []),
        ("binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4", []),
        ("binomial | n 50 | claim p=0 | alpha 0.05 | reject x>=1", []),
        ("binomial | n 50 | reject x>=1", []),
    ],
)
def test_empty_tails(text: str, tails: list[str]) -> None:
    assert [str(tail) for tail in empty_tails(read_plan(text))] == tails


@pytest.mark.parametrize("end", ENDS["either"])
def test_smallest_amount_with_split_rarest_is_found_although_the_other_tail_comes_and_goes(end: str) -> None:
    rate = 0.07 if end == "low" else 0.93
    least = least_amount(LAW, {"n": np.array(10)}, rate, 0.05, end, "rarest")

    def rejects(n: int) -> bool:
        extreme = 0 if end == "low" else n
        return brute.binomial(n, typed(rate)).at_most(extreme, "either", "rarest", Fraction(1, 20))

    assert least == next(n for n in range(1, 200) if rejects(n))


def test_one_sided_plans_have_no_split() -> None:
    assert make_plan("binomial", Items(50), Claim("p", "<=", 0.02), 0.05, "rarest").split == "half"


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"alpha": 5}, "alpha must lie between 0 and 1, but got 5 (type 5% or 0.05)"),
        (
            {"split": "rare"},
            "split must be one of half, nearest, rarest, but got rare (did you mean rarest?)",
        ),
        ({"verdict": "ok"}, "verdict must be one of fail, pass, but got ok"),
    ],
)
def test_bad_options_are_named(change: dict[str, Any], message: str) -> None:
    given: dict[str, Any] = {"alpha": 0.05, "split": "half", "verdict": "fail", **change}
    with pytest.raises(InvalidValue) as refusal:
        make_plan("binomial", Items(50), Claim("p", "=", 0.02), **given)
    assert str(refusal.value) == message


def test_large_designs_are_decided_too() -> None:
    claim = Claim("p", "=", 0.3)
    for split in SPLITS:
        rule = make_plan("binomial", Items(10_000_000), claim, 0.05, split).rule
        assert abs(rule.low - (3e6 - 2840)) < 3 and abs(rule.high - (3e6 + 2840)) < 3
    rule = make_plan("hypergeometric", LotSample(1_000_000, 100_000), Claim("D", "=", 300_000.0), 0.05).rule
    assert abs(rule.low - (30_000 - 269.5)) < 3 and abs(rule.high - (30_000 + 269.5)) < 3
