"""A kind added in one file answers every question, or refuses in one sentence."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest

from steelyard import addin
from steelyard.addin import CATALOGUE
from steelyard.addin.plans import forget
from steelyard.core.kind import KINDS, REQUIRED, Field, Grammar, Wording, register
from steelyard.core.law import ContinuousLaw
from steelyard.core.making import plan_from_claim
from steelyard.core.numbers import read_whole
from steelyard.core.parameter import Parameter
from steelyard.core.text import read_plan, write_plan
from steelyard.core.threshold import ThresholdKind, threshold_fields


@dataclass(frozen=True, slots=True)
class Draws:
    n: int


class GreatestLaw(ContinuousLaw):
    """The greatest of n measurements that are spread evenly from 0 to a bound."""

    statistic = "greatest"

    def at_most(self, x, columns, *rates):
        return np.clip(x / rates[0], 0.0, 1.0) ** columns["n"]

    def at_least(self, x, columns, *rates):
        share = np.clip(x / rates[0], 0.0, 1.0)
        return -np.expm1(columns["n"] * np.log(np.maximum(share, 1e-300)))

    def support(self, design):
        return 0.0, np.inf

    def quantile(self, prob, columns, rate, end):
        below = prob if end == "low" else 1.0 - prob
        return rate * below ** (1.0 / columns["n"])


class GreatestKind(ThresholdKind):
    law = GreatestLaw()
    parameters = (Parameter("bound", "upper bound", "any length above 0", 0.0, np.inf, lower_open=True),)
    grammar = Grammar(
        kind="toy",
        head="toy",
        marker="n",
        design=Draws,
        fields=(Field("n", lambda text, name: read_whole(text, name, 1), default=REQUIRED),),
        order=("n", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording("a toy", "Measure {n} items.", "or so", ("Spread evenly.",)),
        **threshold_fields("greatest", whole=False),
    )


@pytest.fixture
def plan():
    register(GreatestKind())
    forget()
    try:
        yield write_plan(plan_from_claim("toy", {"n": 3}, 10.0, 0.05))
    finally:
        del KINDS["toy"]
        forget()


def test_text_and_round_trip(plan):
    assert plan == "toy | n 3 | claim bound<=10 | alpha 0.05 | reject greatest>=9.830475724915585"
    assert write_plan(read_plan(plan)) == plan


def test_questions_follow_from_the_law(plan):
    assert addin.SY_SIZE(plan) == pytest.approx(0.05, rel=1e-12)
    assert addin.SY_POWER(plan, [[10.0, 20.0]])[0] == pytest.approx([0.05, 1 - 0.95 / 8], rel=1e-12)
    assert addin.SY_BETA(plan, 20) == pytest.approx(0.95 / 8, rel=1e-12)
    assert addin.SY_RATE_FOR(plan, 1 - 0.95 / 8) == pytest.approx(20.0, rel=1e-12)
    assert addin.SY_PVALUE(plan, 9.9) == pytest.approx(1 - 0.99**3, rel=1e-12)
    assert addin.SY_DECIDE(plan, 9.9) == "claim rejected: fail"
    assert addin.SY_REGION(plan) == "greatest ≥ 9.830475724915585"
    assert addin.SY_CHECK(plan) == "ok"


ONE_PLAN = [entry for entry in CATALOGUE.values() if entry.arguments and entry.arguments[0].name == "plan"]


@pytest.mark.parametrize("entry", ONE_PLAN, ids=lambda entry: entry.name)
def test_every_question_answers_or_refuses_in_one_sentence(plan, entry):
    """Further arguments are a number that suits most; a text where that is refused."""
    required = sum(argument.required for argument in entry.arguments) - 1
    for filler in (0.5, "upper", "B2"):
        answer = entry.function(plan, *[filler] * required)
        assert not isinstance(answer, str) or "\n" not in answer
        assert not (isinstance(answer, float) and np.isnan(answer))
