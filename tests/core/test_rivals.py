"""The most powerful plan at a rate, and where power curves cross."""

from __future__ import annotations

import itertools
import math

import pytest
from scipy import optimize
from scipy.stats import binom  # noqa: TID251 - another implementation

import steelyard.core.kinds  # noqa: F401 - registers them
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.plan import Plan
from steelyard.core.questions import power
from steelyard.core.rivals import best, crossing
from steelyard.core.text import read_plan

NEVER = "the two power curves do not cross: one is at least as high throughout"


def plans(*texts: str, kind: str = "binomial") -> list[Plan]:
    return [read_plan(f"{kind} | {text}") for text in texts]


def test_curves_of_one_sided_plans_cross_once() -> None:
    (rate,) = crossing(*plans("n 50 | reject x>=4", "n 20 | reject x>=2"))
    root = optimize.brentq(lambda p: binom.sf(3, 50, p) - binom.sf(1, 20, p), 0.01, 0.3, xtol=1e-15)
    assert math.isclose(rate, root, rel_tol=1e-11)


def test_a_two_sided_curve_can_cross_another_twice() -> None:
    pair = plans("n 80 | reject x<=30 or x>=50", "n 40 | reject x>=22")
    rates = crossing(*pair)
    assert len(rates) == 2
    for rate in rates:
        assert math.isclose(power(pair[0], rate), power(pair[1], rate), rel_tol=1e-9)
    between, outside = sum(rates) / 2, (rates[0] * 0.9, rates[1] * 1.02)
    assert best(pair, between) is not best(pair, outside[0])
    assert best(pair, outside[0]) is best(pair, outside[1])


def test_curves_far_out_cross_too() -> None:
    """Rates of some ppm: the root of P(X >= 2 of 100) = P(X >= 1 of 1), nearly 1/4950."""
    (rate,) = crossing(*plans("n 100 | reject x>=2", "n 1 | reject x>=1"))
    root = optimize.brentq(lambda p: binom.sf(1, 100, p) / p - 1, 1e-5, 1e-2, xtol=1e-18, rtol=1e-14)
    assert math.isclose(rate, root, rel_tol=1e-11)


def test_lots_cross_between_whole_numbers() -> None:
    pair = plans("lot 600 | n 50 | reject x>=4", "lot 600 | n 20 | reject x>=2", kind="hypergeometric")
    (turn,) = crossing(*pair)
    ahead = [power(pair[0], d) > power(pair[1], d) for d in range(2, 400)]
    assert [d for d, (now, then) in enumerate(itertools.pairwise(ahead), 3) if now != then] == [turn]


@pytest.mark.parametrize(
    ("pair", "message"),
    [
        (
            plans("n 80 | reject x>=3", "n 40 | reject x>=3"),
            "the two power curves do not cross: one is at least as high throughout",
        ),
        (
            plans("n 80 | reject x>=3", "n 80 | reject x>=3"),
            "the two power curves do not cross: one is at least as high throughout",
        ),
        (
            [*plans("n 80 | reject x>=3"), *plans("units 80 | reject x>=3", kind="poisson")],
            "plans must be about the same parameter, but got p and rate",
        ),
        (
            plans("lot 60 | n 3 | reject x>=1", "lot 600 | n 3 | reject x>=1", kind="hypergeometric"),
            "plans must be about lots of one size, but got 60 and 600",
        ),
    ],
)
def test_refusals(pair: list[Plan], message: str) -> None:
    with pytest.raises((InvalidValue, NoAnswer)) as refusal:
        crossing(*pair)
    assert str(refusal.value) == message


def test_the_best_has_the_greatest_power() -> None:
    rivals = plans("n 20 | reject x>=2", "n 50 | reject x>=4", "n 80 | reject x>=5")
    for rate in (0.001, 0.02, 0.05, 0.1, 0.3):
        assert power(best(rivals, rate), rate) == max(power(plan, rate) for plan in rivals)


def test_of_equals_the_smaller_sample_is_best() -> None:
    """At p = 1/2, P(X >= 1 of 1) = P(X >= 2 of 3) = 1/2; at p = 0 nothing is found."""
    three, one, two = plans("n 3 | reject x>=2", "n 1 | reject x>=1", "n 2 | reject x>=1")
    assert best([three, one], "50%") is one
    assert best([three, two, one], 0) is one
    assert best([three, two, one], 0.5) is two
