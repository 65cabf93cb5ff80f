"""P-values, decisions and limits as a plan's user asks for them."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from statistics import NormalDist
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.evidence import decide, limit, p_value
from steelyard.core.kind import KINDS, REQUIRED, Field, Grammar, Kind, Wording
from steelyard.core.kinds.binomial import Items
from steelyard.core.law import ContinuousLaw
from steelyard.core.numbers import read_whole
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import RELATIONS, SPLITS, Claim, Plan, Reject
from steelyard.core.questions import size
from steelyard.core.regions import critical_region, make_plan
from steelyard.core.text import read_plan
from steelyard.core.threshold import ThresholdKind, threshold_fields

ABOVE = "binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4"
DEMONSTRATION = "binomial | n 59 | claim p>=0.05 | alpha 0.05 | reject x<=0 | verdict pass"


@pytest.mark.parametrize(
    ("text", "observed", "decision"),
    [
        (ABOVE, 3, "not rejected: pass"),
        (ABOVE, 4, "claim rejected: fail"),
        (ABOVE, "4", "claim rejected: fail"),
        (DEMONSTRATION, 0, "claim rejected: pass"),
        (DEMONSTRATION, 1, "not rejected: fail"),
        ("binomial | n 125 | reject x>=4", 4.0, "claim rejected: fail"),
        ("binomial | n 80 | reject x<=30 or x>=50", 30, "claim rejected: fail"),
        ("binomial | n 80 | reject x<=30 or x>=50", 31, "not rejected: pass"),
        ("poisson | units 2.5 | reject x>=4", 1000, "claim rejected: fail"),
        ("hypergeometric | lot 60 | n 32 | claim D<=0 | reject x>=1", 0, "not rejected: pass"),
    ],
)
def test_decision(text: str, observed: Any, decision: str) -> None:
    assert decide(read_plan(text), observed) == decision


@pytest.mark.parametrize(
    ("text", "observed", "rule"),
    [
        (ABOVE, 51, "be a whole number from 0 to 50"),
        (ABOVE, -1, "be a whole number from 0 to 50"),
        (ABOVE, 2.5, "be a whole number from 0 to 50"),
        (ABOVE, "2%", "be a whole number from 0 to 50"),
        (ABOVE, "two", "be a number"),
        (ABOVE, "#N/A", "be a number"),
        (ABOVE, True, "be a number"),
        (ABOVE, None, "be a number"),
        ("poisson | units 2.5 | claim rate<=1 | reject x>=4", -1, "be a whole number from 0 to 2000000000"),
        ("hypergeometric | lot 60 | n 32 | claim D<=0 | reject x>=1", 33, "be a whole number from 0 to 32"),
    ],
)
@pytest.mark.parametrize(
    "question", [p_value, decide, lambda plan, observed: limit(plan, observed, "upper", 0.9)]
)
def test_impossible_results_are_refused(text: str, observed: Any, rule: str, question: Any) -> None:
    with pytest.raises(InvalidValue) as refusal:
        question(read_plan(text), observed)
    assert (refusal.value.name, refusal.value.rule, refusal.value.value) == ("observed", rule, observed)


def test_questions_on_the_claim_need_one() -> None:
    plan = read_plan("binomial | n 50 | reject x>=4")
    for ask in (lambda: p_value(plan, 3), lambda: limit(plan, 3, "upper", 0.9)):
        with pytest.raises(InvalidValue, match=r"^claim must be written in the plan for this question"):
            ask()


def test_limits_need_an_end_and_a_confidence() -> None:
    plan = read_plan("binomial | n 50 | claim p<=0.02 | reject x>=4")
    with pytest.raises(
        InvalidValue, match=r"^confidence must be given for a plan without alpha, but got nothing$"
    ):
        limit(plan, 3, "upper")
    with pytest.raises(
        InvalidValue, match=r"^confidence must lie between 0 and 1, but got 95 \(type 95% or 0.95\)$"
    ):
        limit(plan, 3, "upper", 95)
    with pytest.raises(InvalidValue, match=r"^end must be one of lower, upper, but got above$"):
        limit(plan, 3, "above", "95%")
    assert limit(plan, 3, "Upper", "95%") == limit(read_plan(ABOVE), 3, "upper")


@given(
    kind=st.sampled_from(["binomial", "poisson", "hypergeometric"]),
    n=st.integers(1, 60),
    percent=st.integers(1, 99),
    below=st.booleans(),
    data=st.data(),
)
def test_one_sided_rules_from_outside_reject_when_the_p_value_is_at_most_the_size(
    kind: str, n: int, percent: int, below: bool, data: st.DataObject
) -> None:
    end = data.draw(st.integers(0, n - 1) if below else st.integers(1, n))
    design = {"binomial": f"n {n}", "poisson": f"units {n}", "hypergeometric": f"lot 100 | n {n}"}[kind]
    symbol = {"binomial": "p", "poisson": "rate", "hypergeometric": "D"}[kind]
    value = percent if kind == "hypergeometric" else percent / 100
    relation, rule = (">=", f"x<={end}") if below else ("<=", f"x>={end}")
    plan = read_plan(f"{kind} | {design} | claim {symbol}{relation}{value} | reject {rule}")
    for x in range(n + 1):  # what never happens under the claim, or always, has no size to compare with
        rejected = decide(plan, x).startswith("claim rejected")
        assert rejected == (p_value(plan, x) <= size(plan)) or not 0 < size(plan) < 1 - 1e-12


@given(
    n=st.integers(1, 90),
    percent=st.integers(1, 99),
    alpha=st.sampled_from([0.01, 0.05, 0.1, 0.25]),
    data=st.data(),
)
def test_p_value_is_at_most_alpha_exactly_when_the_plan_rejects(
    n: int, percent: int, alpha: float, data: st.DataObject
) -> None:
    side, split = data.draw(st.sampled_from(["above", "below", "either"])), data.draw(st.sampled_from(SPLITS))
    try:
        plan = make_plan("binomial", Items(n), Claim("p", RELATIONS[side], percent / 100), alpha, split)
    except InvalidValue:
        return
    for x in range(n + 1):
        assert (p_value(plan, x) <= alpha) == decide(plan, x).startswith("claim rejected")


def test_a_tie_with_alpha_falls_on_the_side_of_the_decision() -> None:
    head = "hypergeometric | lot 60 | n 3 | claim D<=1 | alpha 0.05 | reject"
    assert p_value(read_plan(f"{head} x>=1"), 1) == 0.05
    outside = p_value(
        read_plan(f"{head} x>=2"), 1
    )  # from outside: does not reject what has a p-value of alpha
    assert 0.05 < outside == pytest.approx(0.05, rel=1e-12)


@pytest.mark.parametrize(
    "text",
    [
        "binomial | n 80 | claim p=0.5 | alpha 0.05 | reject x<=30 or x>=50",
        "binomial | n 80 | claim p=0.5 | alpha 0.05 | split rarest | reject x<=30 or x>=50",
        "binomial | n 80 | claim p=0.5 | alpha 0.05 | split nearest | reject x<=31 or x>=49",
        "binomial | n 50 | claim p=0.02 | alpha 0.05 | reject x>=4",
        # Without alpha a rule will do that is the region of some level.
        "binomial | n 80 | claim p=0.5 | reject x<=27 or x>=53",
        "binomial | n 50 | claim p=0.02 | reject x>=3",
        "poisson | units 10 | claim rate=0.05 | reject x>=3",
    ],
)
def test_two_sided_rules_that_follow_their_split_have_p_values_and_limits(text: str) -> None:
    plan = read_plan(text)
    assert 0 < p_value(plan, 1) <= 1
    assert limit(plan, 1, "lower", 0.9) < limit(plan, 1, "upper", 0.9)


@pytest.mark.parametrize(
    "text",
    [
        "binomial | n 80 | claim p=0.5 | alpha 0.05 | reject x<=31 or x>=49",
        "binomial | n 80 | claim p=0.5 | alpha 0.05 | reject x<=29 or x>=51",
        "binomial | n 80 | claim p=0.5 | reject x<=30 or x>=51",
        "binomial | n 80 | claim p=0.5 | reject x>=50",
        "binomial | n 80 | claim p=0.5 | reject x<=30",
        "poisson | units 10 | claim rate=0.5 | reject x<=0",
    ],
)
def test_two_sided_rules_that_do_not_follow_their_split_have_none(text: str) -> None:
    plan = read_plan(text)
    with pytest.raises(NoAnswer, match=r"^no p-value: the rule is not the region that split half"):
        p_value(plan, 40 if plan.kind == "binomial" else 5)
    with pytest.raises(NoAnswer, match=r"^no confidence limit: the rule is not the region that split half"):
        limit(plan, 5, "upper", 0.95)


class ToyLaw(ContinuousLaw):
    """A measurement with standard deviation 1/sqrt(n)."""

    statistic = "mean"

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        z = np.asarray((x - rates[0]) * np.sqrt(columns["n"]))
        return np.vectorize(lambda value: math.erfc(-value / math.sqrt(2)) / 2)(z)

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        return self.at_most(-np.asarray(x), columns, -rates[0])

    def support(self, design: Any) -> tuple[float, float]:
        return -math.inf, math.inf

    def quantile(self, prob: float, columns: Columns, rate: Floats, end: str) -> Floats:
        z = NormalDist().inv_cdf(prob)
        return np.asarray(rate + (z if end == "low" else -z) / np.sqrt(columns["n"]))


WORDING = Wording("toys", "Measure {n} toys.", "measure", ())


class ToyKind(ThresholdKind):
    """A threshold kind of measurements."""

    law = ToyLaw()
    parameters = (Parameter("mean", "mean", "mm", -math.inf, math.inf),)
    grammar = Grammar(
        kind="toy",
        head="toy",
        marker="n",
        design=Items,
        fields=(Field("n", read_whole, default=REQUIRED),),
        order=("n", "claim", "alpha", "split", "reject", "verdict"),
        wording=WORDING,
        **threshold_fields("mean", whole=False),
    )

    def read_observed(self, value: Any, plan: Plan) -> float:
        return float(value)

    def limit(self, plan: Plan, observed: Any, end: str, miss: float) -> float:
        raise NotImplementedError


@dataclass(frozen=True)
class Nothing:
    """A design without fields."""


class PlainKind(Kind):
    """A kind with none of the abilities."""

    parameters = (Parameter("p", "rate", "proportion", 0.0, 1.0),)
    grammar = Grammar(
        kind="plain",
        head="plain",
        marker="",
        design=Nothing,
        fields=(),
        order=("claim", "reject"),
        wording=WORDING,
        **threshold_fields("x", whole=True),
    )

    def columns(self, plans: Sequence[Plan]) -> Columns:
        raise NotImplementedError

    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        raise NotImplementedError

    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        raise NotImplementedError


@pytest.fixture(autouse=True)
def toys(monkeypatch: pytest.MonkeyPatch) -> None:
    for kind in (ToyKind(), PlainKind()):
        monkeypatch.setitem(KINDS, kind.grammar.kind, kind)


def test_measurements_go_the_same_way() -> None:
    plan = make_plan("toy", Items(4), Claim("mean", "=", 10.0), 0.05)
    assert (plan.rule.low, plan.rule.high) == pytest.approx((9.02002, 10.97998), abs=1e-5)
    assert p_value(plan, 10.97998) == pytest.approx(0.05, abs=1e-6)
    assert (decide(plan, 11), decide(plan, 10)) == ("claim rejected: fail", "not rejected: pass")
    above = make_plan("toy", Items(4), Claim("mean", "<=", 10.0), 0.05)
    assert above.rule == Reject(None, pytest.approx(10.822427, abs=1e-6))
    assert p_value(above, 9) == pytest.approx(0.97725, abs=1e-5)
    below = make_plan("toy", Items(4), Claim("mean", ">=", 10.0), 0.05)
    assert p_value(below, 9) == pytest.approx(0.02275, abs=1e-5)


def test_rules_of_measurements_from_outside_need_equal_tails() -> None:
    assert p_value(read_plan("toy | n 4 | claim mean=10 | reject mean<=9 or mean>=11"), 10) == 1
    for rule in ("mean<=9 or mean>=11.5", "mean>=11"):
        with pytest.raises(NoAnswer, match=r"^no p-value: the rule is not the region"):
            p_value(read_plan(f"toy | n 4 | claim mean=10 | reject {rule}"), 10)


@pytest.mark.parametrize("split", ["nearest", "rarest"])
def test_measurements_have_only_equal_tails(split: str) -> None:
    with pytest.raises(InvalidValue, match=rf"^split must be half for a measurement, but got {split}$"):
        make_plan("toy", Items(4), Claim("mean", "=", 10.0), 0.05, split)


def test_kinds_without_an_ability_say_so() -> None:
    plan = read_plan("plain | claim p<=0.5 | reject x>=1")
    for ask, lack in (
        (lambda: p_value(plan, 1), "p-value"),
        (lambda: decide(plan, 1), "decision on an observed result"),
        (lambda: limit(plan, 1, "upper", 0.9), "confidence limit"),
        (
            lambda: critical_region(PlainKind(), Nothing(), Claim("p", "<=", 0.5), 0.05),
            "rule that follows from",
        ),
    ):
        with pytest.raises(NoAnswer, match=rf"^a plan of kind plain has no {lack}"):
            ask()
