"""The double plan with the smallest average sample, against every double plan there is."""

from __future__ import annotations

from fractions import Fraction
from functools import cache
from math import comb

import pytest

import steelyard.core.kinds  # noqa: F401 - registers every kind
from steelyard.core.double import smallest_double
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.outgoing import average_sample
from steelyard.core.plan import Plan
from steelyard.core.questions import power, size
from steelyard.core.text import read_plan, write_plan


@cache
def binomial(n: int, x: int, rate: Fraction) -> Fraction:
    return comb(n, x) * rate**x * (1 - rate) ** (n - x) if 0 <= x <= n else Fraction(0)


@cache
def lot(size: int, marked: int, n: int, x: int) -> Fraction:
    if not 0 <= x <= n or marked < 0:
        return Fraction(0)
    return Fraction(comb(marked, x) * comb(size - marked, n - x), comb(size, n))


def cheapest(chance: object, most: int, ratio: int, risks: tuple, rates: tuple) -> tuple | None:
    """Return average, first stage and numbers of the best plan of all, in fractions."""
    (alpha, target), (claim, catch) = risks, rates
    best = None
    for n in range(1, most + 1):
        for last in range(1, 3 * n):
            for accept in range(min(last, n)):
                reached = accepted = Fraction(0)
                opened = Fraction(0)
                for rate, place in ((claim, 0), (catch, 1)):
                    passed = sum(chance(rate, 0, 0, n, x) for x in range(accept + 1))
                    for x in range(accept + 1, min(last, n) + 1):
                        first = chance(rate, 0, 0, n, x)
                        opened += first * (place == 0)
                        passed += first * sum(chance(rate, n, x, ratio * n, y) for y in range(last - x + 1))
                    accepted, reached = (passed, reached) if place == 0 else (accepted, 1 - passed)
                if 1 - accepted <= alpha and reached >= target:
                    found = (n + ratio * n * opened, n, accept, last)
                    best = found if best is None else min(best, found)
    return best


def parts(plan: Plan) -> tuple[int, int, int]:
    return plan.design.stages[0], plan.rule.accept[0], plan.rule.accept[1]


@pytest.mark.parametrize("ratio", [1, 2])
@pytest.mark.parametrize(
    ("claim", "catch", "alpha", "target"), [("10%", "50%", "10%", "80%"), ("20%", "60%", "15%", "75%")]
)
def test_every_double_plan_for_items(claim: str, catch: str, alpha: str, target: str, ratio: int) -> None:
    share = [Fraction(text.rstrip("%")) / 100 for text in (alpha, target, claim, catch)]
    best = cheapest(
        lambda rate, done, found, n, x: binomial(n, x, rate), 9, ratio, tuple(share[:2]), tuple(share[2:])
    )
    plan = smallest_double("binomial", claim, alpha, catch, target, ratio=ratio)
    assert parts(plan) == best[1:]
    assert average_sample(plan, claim) == pytest.approx(float(best[0]), rel=1e-12)


@pytest.mark.parametrize("ratio", [1, 2])
def test_every_double_plan_for_a_lot(ratio: int) -> None:
    best = cheapest(
        lambda rate, done, found, n, x: lot(24 - done, rate - found, n, x),
        24 // (1 + ratio), ratio, (Fraction(1, 10), Fraction(4, 5)), (2, 9),
    )  # fmt: skip
    plan = smallest_double("hypergeometric", 2, "10%", 9, "80%", ratio=ratio, lot=24)
    assert parts(plan) == best[1:]
    assert average_sample(plan, 2) == pytest.approx(float(best[0]), rel=1e-12)


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        (("binomial", "1%", "5%", "5%", "90%"),
         "binomial | stages 69 then 69 | accept 0 then 3 | reject 4 then 4"),
        (("binomial", "50 ppm", "5%", "200 ppm", "90%"),
         "binomial | stages 27707 then 27707 | accept 2 then 5 | reject 6 then 6"),
        (("poisson", 0.05, "5%", 0.2, "90%"), None),
        (("hypergeometric", "1%", "5%", "5%", "90%", 800),
         "hypergeometric | lot 800 | stages 50 then 100 | accept 0 then 3 | reject 4 then 4"),
    ],
)  # fmt: skip
def test_both_risks_are_kept(arguments: tuple, text: str | None) -> None:
    kind, claim, alpha, catch, target, *rest = arguments
    plan = smallest_double(kind, claim, alpha, catch, target, lot=rest[0] if rest else None)
    assert text is None or write_plan(plan).startswith(text)
    assert size(plan) <= 0.05
    assert power(plan, catch) >= 0.9
    other = smallest_double(kind, claim, alpha, catch, target, lot=rest[0] if rest else None, ratio=1)
    assert average_sample(plan, plan.claim.value) <= average_sample(other, plan.claim.value)


def test_a_tie_with_alpha_is_kept() -> None:
    """A plan's size as alpha, in fractions: floats may lie on either side of it."""
    found = read_plan("hypergeometric | lot 24 | stages 6 then 6 | accept 0 then 2 | reject 3 then 3")
    exact = sum(
        lot(24, 3, 6, x) * sum(lot(18, 3 - x, 6, y) for y in range(3 - x, 7)) for x in range(1, 3)
    ) + lot(24, 3, 6, 3)
    assert power(found, 3) == pytest.approx(float(exact), rel=1e-12)
    plan = smallest_double("hypergeometric", 3, float(exact), 12, "90%", ratio=1, lot=24)
    assert size(plan) <= float(exact) * (1 + 1e-12)


@pytest.mark.parametrize(
    ("keywords", "message"),
    [
        ({"ratio": 3}, "ratio must be 1 or 2: the second stage as a multiple of the first, but got 3"),
        ({"claim": "p>=1%"}, "claim must be of the form p<=0.02 for a double plan"),
        ({"catch": "0.5%"}, "catch must lie above the claim"),
        ({"kind_name": "normal"}, "sigma must be given"),
    ],
)
def test_what_makes_no_sense_is_refused(keywords: dict, message: str) -> None:
    arguments = {
        "kind_name": "binomial",
        "claim": "1%",
        "alpha": "5%",
        "catch": "5%",
        "power": "90%",
    } | keywords
    if "p>=" in arguments["claim"]:
        arguments["catch"] = "0.1%"
    with pytest.raises(InvalidValue) as refusal:
        smallest_double(**arguments)
    assert message in str(refusal.value)


def test_rates_too_close_are_refused_at_once() -> None:
    with pytest.raises(NoAnswer, match="here it would accept 124: choose a higher rate to catch"):
        smallest_double("binomial", "1%", "5%", "1.3%", "90%")
    with pytest.raises(NoAnswer, match="no double plan has alpha"):
        smallest_double("hypergeometric", "2%", "5%", "5%", "90%", lot=60)
