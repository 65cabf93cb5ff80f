"""Tails and points of the three count laws, against fifty-digit arithmetic and against scipy.stats."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import accuracy
import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - the general reference library of these tests

from steelyard.core import tails

POINTS = 6700  # of each law, for three functions
BANDS = ((1e-30, 1e-12), (1e-290, 1e-11))  # least probability, greatest relative error

Point = tuple[Any, ...]


def relative_error(got: float, exact: mpmath.mpf) -> float:
    return float(abs(mpmath.mpf(float(got)) - exact) / exact)


def count_near(rng: np.random.Generator, mean: float, deviation: float, low: int, high: float) -> int:
    """Draw a count up to 38 standard deviations away, farther on the longer side."""
    z = rng.uniform(-38, 38)
    return int(min(max(round(mean + z * deviation + z * abs(z) / 4), low), high))


def binomial_point(rng: np.random.Generator) -> Point:
    n = int(10 ** rng.uniform(0, 5))
    p = float(rng.choice([10 ** rng.uniform(-7, 0), rng.uniform(1e-7, 1), 1 - 10 ** rng.uniform(-6, 0)]))
    p = min(max(p, 1e-7), 0.999999)
    return count_near(rng, n * p, math.sqrt(n * p * (1 - p)), 0, n), n, p


def poisson_point(rng: np.random.Generator) -> Point:
    mean = float(10 ** rng.uniform(-4, 5))
    return count_near(rng, mean, math.sqrt(mean), 0, math.inf), mean


def hypergeometric_point(rng: np.random.Generator) -> Point:
    lot = int(10 ** rng.uniform(0, 6))
    n, defectives = (
        min(lot, int(lot ** rng.uniform(0, 1)) if rng.random() < 0.5 else int(rng.integers(0, lot + 1)))
        for _ in range(2)
    )
    mean = n * defectives / lot
    deviation = math.sqrt(mean * (1 - defectives / lot) * (lot - n) / max(lot - 1, 1))
    low, high = max(0, n + defectives - lot), min(n, defectives)
    return count_near(rng, mean, deviation, low, high), lot, defectives, n


LAWS = {
    "binomial": (
        binomial_point,
        (tails.binomial_at_most, tails.binomial_at_least, tails.binomial_pmf),
        (accuracy.binomial_tail, accuracy.binomial_pmf),
    ),
    "poisson": (
        poisson_point,
        (tails.poisson_at_most, tails.poisson_at_least, tails.poisson_pmf),
        (accuracy.poisson_tail, accuracy.poisson_pmf),
    ),
    "hypergeometric": (
        hypergeometric_point,
        (tails.hypergeometric_at_most, tails.hypergeometric_at_least, tails.hypergeometric_pmf),
        (accuracy.hypergeometric_tail, accuracy.hypergeometric_pmf),
    ),
}


@pytest.mark.parametrize("name", LAWS)
def test_random_points_against_fifty_digits(name: str) -> None:
    draw, functions, (tail, pmf) = LAWS[name]
    rng = np.random.default_rng(20260714)
    points = [draw(rng) for _ in range(POINTS)]
    columns = [np.array(column) for column in zip(*points, strict=True)]
    references: list[Callable[..., mpmath.mpf]] = [
        lambda *point: tail(*point, False), lambda *point: tail(*point, True), pmf,
    ]  # fmt: skip
    failures = []
    for function, reference in zip(functions, references, strict=True):
        got = function(*columns)
        assert ((got >= 0) & (got <= 1)).all()
        exact = [reference(*point) for point in points]
        for least, (low, limit) in zip((2.0, 1e-30), BANDS, strict=True):
            band = [i for i, value in enumerate(exact) if low <= value < least]
            errors = {i: relative_error(got[i], exact[i]) for i in band}
            worst = max(errors, key=lambda i: errors[i])
            size = float(exact[worst])
            print(f"{function.__name__}: {errors[worst]:.1e} of {len(band)}, at {points[worst]} ({size:.1e})")
            if errors[worst] > limit:
                failures.append((function.__name__, points[worst], errors[worst]))
    assert not failures


# Points at which plain library calls lose digits or drop to zero, with the reason.
AWKWARD = [
    pytest.param(tails.binomial_at_least, (1511, 1544, 0.6), 1e-11, id="betainc returns 0"),
    pytest.param(tails.binomial_at_least, (3, 100_000, 1e-7), 1e-12, id="rounding of 1-p spoils betaincc"),
    pytest.param(tails.binomial_at_least, (1, 10, 1e-18), 1e-12, id="1-p rounds to 1"),
    pytest.param(tails.binomial_at_least, (8, 89573, 8.9929e-05), 1e-12, id="betainc near the mean"),
    pytest.param(tails.binomial_at_least, (5, 88648, 5.92e-05), 1e-12, id="betainc below the mean"),
    pytest.param(tails.binomial_at_most, (3, 1_000_000, 5e-6), 1e-12, id="rounding of 1-p at ppm rates"),
    pytest.param(tails.binomial_at_most, (0, 100_000, 1e-5), 1e-12, id="all of the tail at one count"),
    pytest.param(tails.binomial_at_most, (26298, 63481, 0.4516843805419093), 1e-11, id="deep lower tail"),
    pytest.param(tails.poisson_at_most, (7979, 10837.721682379064), 1e-11, id="gammaincc deep"),
    pytest.param(tails.poisson_at_least, (2373, 1119.121474977859), 1e-11, id="gammainc deep"),
    pytest.param(tails.hypergeometric_at_least, (2302, 2563, 2302, 2560), 1e-12, id="narrow support"),
    pytest.param(tails.hypergeometric_at_least, (250_100, 10**6, 500_000, 500_000), 1e-12, id="wide support"),
]  # fmt: skip


@pytest.mark.parametrize(("function", "point", "limit"), AWKWARD)
def test_awkward_points(function: Callable[..., Any], point: Point, limit: float) -> None:
    law, _, tail = function.__name__.partition("_")
    exact = LAWS[law][2][0](*point, tail == "at_least")
    assert exact > 1e-290
    assert relative_error(function(*point), exact) <= limit


def test_outside_the_support_the_answer_is_exact() -> None:
    x = np.array([-(10**9), -1, 0, 1, 2, 3, 10**9])
    assert tails.binomial_at_least(x, 2, 0.5).tolist() == [1, 1, 1, 0.75, 0.25, 0, 0]
    assert tails.binomial_at_most(x, 2, 0.5).tolist() == [0, 0, 0.25, 0.75, 1, 1, 1]
    assert tails.binomial_pmf(x, 2, 0.5)[[0, 1, 5, 6]].tolist() == [0, 0, 0, 0]
    assert tails.poisson_at_least(x, 0.5)[[0, 1, 2, 6]].tolist() == [1, 1, 1, 0]
    assert tails.poisson_at_most(x, 0.5)[[0, 1, 6]].tolist() == [0, 0, 1]
    assert tails.hypergeometric_at_least(x, 4, 3, 3)[[0, 1, 2, 3, 4, 6]].tolist() == [1, 1, 1, 1, 1, 0]
    assert tails.hypergeometric_at_most(x, 4, 3, 3)[[0, 1, 2, 3, 5, 6]].tolist() == [0, 0, 0, 0, 1, 1]
    assert tails.hypergeometric_pmf(x, 4, 3, 3)[[0, 1, 2, 3, 6]].tolist() == [0, 0, 0, 0, 0]


@pytest.mark.parametrize(
    ("law", "rest", "only"),
    [
        ("binomial", (3, 0.0), 0), ("binomial", (3, 1.0), 3), ("binomial", (0, 0.3), 0),
        ("binomial", (0, 1.0), 0), ("poisson", (0.0,), 0),
        ("hypergeometric", (9, 0, 4), 0), ("hypergeometric", (9, 9, 4), 4), ("hypergeometric", (9, 5, 9), 5),
        ("hypergeometric", (9, 5, 0), 0), ("hypergeometric", (0, 0, 0), 0),
    ],
)  # fmt: skip
def test_laws_of_one_certain_count(law: str, rest: Point, only: int) -> None:
    x = np.arange(-1, 8)
    at_most, at_least, pmf = LAWS[law][1]
    assert at_most(x, *rest).tolist() == (x >= only).astype(float).tolist()
    assert at_least(x, *rest).tolist() == (x <= only).astype(float).tolist()
    assert pmf(x, *rest).tolist() == (x == only).astype(float).tolist()


def test_broadcasting_types_and_empty_arrays() -> None:
    grid = tails.binomial_at_least(np.array([[4], [11]], dtype=np.int8), 50, np.array([0.02, 0.1, 0.3]))
    assert grid.shape == (2, 3)
    assert grid.dtype == np.float64
    assert grid[1, 2] == tails.binomial_at_least(11, 50, 0.3)
    assert tails.poisson_at_most(np.int8(2), 6) == tails.poisson_at_most(2, 6.0)
    curve = tails.hypergeometric_at_most(2, 800, np.arange(0, 801), 50)
    assert curve.shape == (801,)
    assert curve[8] == tails.hypergeometric_at_most(2, 800, 8, 50)
    for law in LAWS.values():
        for function in law[1]:
            assert function(*[np.array([])] * (function.__code__.co_argcount)).shape == (0,)


def test_grids_that_reach_far_equal_single_calls() -> None:
    x, n, p = np.array([[4.0], [60.0]]), np.array([[50.0], [9000.0]]), np.geomspace(1e-6, 0.9, 40)
    for function in (tails.binomial_at_least, tails.binomial_at_most):
        grid = function(x, n, p)
        single = [[function(a, b, rate) for rate in p] for a, b in zip(x[:, 0], n[:, 0], strict=True)]
        np.testing.assert_allclose(grid, single, rtol=2e-12, atol=1e-290)


def test_general_reference_library() -> None:
    """scipy.stats, within the digits that it has itself."""
    x = np.arange(0, 40)
    near = {"rtol": 1e-9, "atol": 1e-250}
    np.testing.assert_allclose(tails.binomial_at_most(x, 60, 0.3), stats.binom.cdf(x, 60, 0.3), **near)
    np.testing.assert_allclose(tails.binomial_at_least(x, 60, 0.3), stats.binom.sf(x - 1, 60, 0.3), **near)
    np.testing.assert_allclose(tails.binomial_pmf(x, 60, 0.3), stats.binom.pmf(x, 60, 0.3), **near)
    np.testing.assert_allclose(tails.poisson_at_most(x, 9.5), stats.poisson.cdf(x, 9.5), **near)
    np.testing.assert_allclose(tails.poisson_at_least(x, 9.5), stats.poisson.sf(x - 1, 9.5), **near)
    np.testing.assert_allclose(tails.poisson_pmf(x, 9.5), stats.poisson.pmf(x, 9.5), **near)
    law = stats.hypergeom(500, 50, 60)
    np.testing.assert_allclose(tails.hypergeometric_at_most(x, 500, 50, 60), law.cdf(x), **near)
    np.testing.assert_allclose(tails.hypergeometric_at_least(x, 500, 50, 60), law.sf(x - 1), **near)
    np.testing.assert_allclose(tails.hypergeometric_pmf(x, 500, 50, 60), law.pmf(x), **near)


@given(st.integers(0, 400), st.integers(1, 400), st.floats(0, 1))
def test_binomial_tails_complement_and_mirror(x: int, n: int, p: float) -> None:
    lower, upper = tails.binomial_at_most(x, n, p), tails.binomial_at_least(x + 1, n, p)
    assert math.isclose(lower + upper, 1, rel_tol=1e-12)
    if 1 - (1 - p) == p:  # only then is 1 - p the mirror image to the last digit
        assert math.isclose(lower, tails.binomial_at_least(n - x, n, 1 - p), rel_tol=1e-11, abs_tol=1e-290)


@given(st.integers(0, 3000), st.floats(0, 2000))
def test_poisson_tails_complement(x: int, mean: float) -> None:
    total = tails.poisson_at_most(x, mean) + tails.poisson_at_least(x + 1, mean)
    assert math.isclose(total, 1, rel_tol=1e-12)


@given(st.data())
def test_hypergeometric_tails_complement_and_swap(data: st.DataObject) -> None:
    lot = data.draw(st.integers(1, 500))
    defectives, n, x = (data.draw(st.integers(0, lot)) for _ in range(3))
    lower, upper = (
        tails.hypergeometric_at_most(x, lot, defectives, n),
        tails.hypergeometric_at_least(x + 1, lot, defectives, n),
    )
    assert math.isclose(lower + upper, 1, rel_tol=1e-12)
    swapped = tails.hypergeometric_at_most(x, lot, n, defectives)
    assert math.isclose(lower, swapped, rel_tol=1e-11, abs_tol=1e-290)
