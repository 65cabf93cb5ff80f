"""Power functions as algebra: read back by a small evaluator, they are the exact power."""

from __future__ import annotations

import random
from fractions import Fraction
from typing import Any

import algebra_reader
import brute_sizes as brute
import mpmath
import pytest
from algebra_reader import evaluate

import steelyard.core.kinds  # noqa: F401 - registers them
from steelyard.core.kind import kind_of
from steelyard.core.text import read_plan


def expression(text: str) -> str:
    plan = read_plan(text)
    found = kind_of(plan).algebra(plan)
    assert found is not None and len(found) <= 255
    return found


def random_rule(most: int, rng: random.Random) -> tuple[str, int, int]:
    """Return a rule, and up to which and from which count it rejects."""
    while True:
        low, high = sorted(rng.sample(range(-1, most + 2), 2))
        if 2 <= high - low < most + 2:
            ends = [*([f"x<={low}"] if low >= 0 else []), *([f"x>={high}"] if high <= most else [])]
            return " or ".join(ends), low, high


@pytest.mark.parametrize(
    ("text", "algebra"),
    [
        ("binomial | n 13 | reject x>=2", "1 - (1-p)^13 - 13 p (1-p)^12"),
        ("binomial | n 59 | reject x<=0", "(1-p)^59"),
        ("binomial | n 1 | reject x>=1", "p"),
        ("binomial | n 1 | reject x<=0", "(1-p)"),
        ("binomial | n 7 | reject x<=1 or x>=6", "(1-p)^7 + 7 p (1-p)^6 + 7 p^6 (1-p) + p^7"),
        (
            "binomial | n 50 | reject x>=4",
            "1 - (1-p)^50 - 50 p (1-p)^49 - 1225 p^2 (1-p)^48 - 19600 p^3 (1-p)^47",
        ),
        ("binomial | n 80 | reject x<=30 or x>=50", "1 - sum(C(80,k) p^k (1-p)^(80-k), k=31..49)"),
        ("binomial | n 10000000 | reject x>=900", "1 - sum(C(10000000,k) p^k (1-p)^(10000000-k), k=0..899)"),
        ("poisson | units 1 | reject x>=1", "1 - exp(-rate)"),
        ("poisson | units 2.5 | reject x<=1", "exp(-2.5 rate) (1 + 2.5 rate)"),
        ("poisson | units 120 | reject x>=3", "1 - exp(-120 rate) (1 + 120 rate + (120 rate)^2/2)"),
        ("poisson | units 1 | reject x<=1 or x>=4", "1 - exp(-rate) (rate^2/2 + rate^3/6)"),
        ("poisson | units 120 | reject x>=41", "1 - exp(-120 rate) sum((120 rate)^k/k!, k=0..40)"),
        ("hypergeometric | lot 60 | n 32 | reject x>=1", "1 - C(60-D,32)/C(60,32)"),
        (
            "hypergeometric | lot 800 | n 50 | reject x>=3",
            "1 - (C(800-D,50) + D C(800-D,49) + C(D,2) C(800-D,48))/C(800,50)",
        ),
        (
            "hypergeometric | lot 800 | n 50 | reject x>=21",
            "sum(C(D,k) C(800-D,50-k), k=21..50)/C(800,50)",
        ),
    ],
)
def test_wording(text: str, algebra: str) -> None:
    assert expression(text) == algebra


def test_binomial_algebra_is_the_exact_power() -> None:
    rng = random.Random(1)
    for n in [*range(1, 30), *rng.sample(range(30, 200), 30)]:
        rule, low, high = random_rule(n, rng)
        algebra = expression(f"binomial | n {n} | reject {rule}")
        for p in (Fraction(0), Fraction(1), Fraction(rng.randint(1, 99), 100)):
            law = brute.binomial(n, p)
            assert evaluate(algebra, p=p) == Fraction(brute.power(law, low, high), law.total), algebra


def test_lot_algebra_is_the_exact_power() -> None:
    rng = random.Random(2)
    for _ in range(80):
        lot = rng.randint(3, 90)
        n = rng.randint(2, lot)
        rule, low, high = random_rule(n, rng)
        algebra = expression(f"hypergeometric | lot {lot} | n {n} | reject {rule}")
        for defectives in (0, lot, rng.randint(0, lot)):
            law = brute.hypergeometric(lot, defectives, n)
            value = evaluate(algebra, D=Fraction(defectives))
            assert value == Fraction(brute.power(law, low, high), law.total), algebra


def test_poisson_algebra_is_the_power() -> None:
    rng = random.Random(3)
    for _ in range(80):
        units, most = rng.choice(("1", "2.5", "120", "0.125")), rng.choice((3, 12, 60))
        rule, low, high = random_rule(most, rng)
        rate = Fraction(rng.randint(1, 3 * most)) / (2 * Fraction(units))
        law = brute.poisson(rate * Fraction(units))
        exact = brute.power(law, low, high if f"x>={high}" in rule else len(law.weights))
        with mpmath.workdps(70):
            value = evaluate(expression(f"poisson | units {units} | reject {rule}"), rate=rate)
            assert abs(value - mpmath.mpf(exact) / law.total) < mpmath.mpf(10) ** (4 - brute.DIGITS)


@pytest.mark.parametrize(
    ("text", "values", "value"),
    [
        ("1 - 2 x/4 + 3", {"x": Fraction(3)}, Fraction(5, 2)),
        ("-x^2 y!", {"x": Fraction(3), "y": Fraction(4)}, Fraction(-216)),
        ("sum(k a, k=2..4) b", {"a": Fraction(2), "b": Fraction(1, 2)}, Fraction(9)),
        ("C(5,2) C(2,5)", {}, Fraction(0)),
    ],
)
def test_the_reader_reads_as_people_do(text: str, values: dict[str, Any], value: Fraction) -> None:
    assert algebra_reader.evaluate(text, **values) == value
