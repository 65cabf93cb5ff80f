"""Noncentral t and the other continuous tails, against fifty digits and published values."""

from __future__ import annotations

import math

import continuous as exact
import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats  # noqa: TID251 - the general reference library of these tests

from steelyard.core import tails_continuous as tails
from steelyard.core.tails_noncentral import student_at_least, student_at_most

CHECKS = {
    # (t, degrees of freedom, delta); row A-K11-13 has a broken number of degrees of freedom, no sample has
    "A-K11-06": (2.34, 3, 1.0),
    "A-K11-07": (23.0, 20, 23.0),
    "A-K11-08": (39.0, 12, 39.0),
}


@pytest.mark.parametrize("row", exact.check_rows(CHECKS))
def test_published_noncentral_t(row: dict[str, str]) -> None:
    found = float(student_at_most(*CHECKS[row["id"]]))
    assert found == pytest.approx(float(row["computed"]), rel=1e-13)
    # The figures of Benton and Krishnamoorthy agree with fifty digits to 12 to 14 digits, not to all 15.
    assert found == pytest.approx(float(row["published"]), rel=5e-13)


def points() -> list[tuple[float, int, float]]:
    """Draw t, df and delta over the whole domain, many near the step of Phi."""
    rng = np.random.default_rng(20)
    drawn = []
    for place in range(32):
        df = int(rng.integers(1, 6)) if place % 3 == 0 else int(10 ** rng.uniform(0, 6))
        delta = float(rng.choice([-1, 1]) * 10 ** rng.uniform(-2, 3.4))
        t = [delta * math.exp(0.3 * rng.normal()), delta + 10 * rng.normal(), 10 ** rng.uniform(-3, 3.4)]
        drawn.append((float(t[place % 3]), df, delta))
    return [*drawn, (0.0, 5, 1.5), (2.0, 7, 0.0), (-12.7, 1, 0.0), (636.6, 1, 500.0), (-3.0, 20, 5.0)]


def test_noncentral_t_against_fifty_digits() -> None:
    drawn = points()
    worst = 0.0
    for upper, tail in ((False, student_at_most), (True, student_at_least)):
        found = tail(*map(np.array, zip(*drawn, strict=True)))
        for value, point in zip(found, drawn, strict=True):
            truth = exact.t_tail(*point, upper)
            if truth >= mpmath.mpf("1e-290"):
                worst = max(worst, exact.relative_error(value, truth))
    assert worst < 2e-12


@given(
    st.floats(-1e15, 1e15),
    st.integers(1, 1_000_000),
    st.one_of(st.floats(-50, 50), st.floats(allow_nan=False, allow_infinity=False)),
)
def test_the_two_tails_are_probabilities_and_add_up(t: float, df: int, delta: float) -> None:
    low, high = float(student_at_most(t, df, delta)), float(student_at_least(t, df, delta))
    assert 0 <= low <= 1
    assert 0 <= high <= 1
    assert low + high == pytest.approx(1, abs=1e-12)


def test_infinite_t() -> None:
    assert student_at_most([-np.inf, np.inf], 5, 1.5).tolist() == [0, 1]
    assert student_at_least([-np.inf, np.inf], 5, 1.5).tolist() == [1, 0]


def test_where_general_libraries_fail_the_tail_is_exact() -> None:
    """For t < 0 < delta a series loses all digits below about 1e-16; the integral does not."""
    for point in ((-1.0, 10, 8.5), (-2.2, 11, 12.0), (-2.7, 5, 30.0)):
        truth = exact.t_tail(*point, upper=False)
        assert exact.relative_error(float(student_at_most(*point)), truth) < 5e-13


@pytest.mark.parametrize("df", [1, 2, 11, 30, 1000])
def test_noncentral_t_agrees_with_scipy_in_the_body(df: int) -> None:
    t, delta = np.array([-2.0, 0.5, 2.0, 5.0]), np.array([-1.0, 0.0, 1.5, 3.0])
    assert student_at_least(t, df, delta) == pytest.approx(stats.nct.sf(t, df, delta), rel=1e-11)


def test_chi_square_and_normal_against_fifty_digits() -> None:
    rng = np.random.default_rng(21)
    worst = {"body": 0.0, "far": 0.0}
    for _ in range(150):
        df, z = int(10 ** rng.uniform(0, 5)), rng.uniform(-37, 37)
        x = float(df * math.exp(z * math.sqrt(2 / df)))
        for upper, tail in ((False, tails.chi_square_at_most), (True, tails.chi_square_at_least)):
            truth = exact.chi_square_tail(mpmath.mpf(x), df, upper)
            if truth >= mpmath.mpf("1e-290"):
                band = "body" if truth > mpmath.mpf("1e-30") else "far"
                worst[band] = max(worst[band], exact.relative_error(float(tail(x, df)), truth))
        for upper, tail in ((False, tails.normal_at_most), (True, tails.normal_at_least)):
            truth = exact.normal_tail(mpmath.mpf(z), upper)
            assert exact.relative_error(float(tail(z)), truth) < 2e-13
    assert worst["body"] < 2e-12
    assert worst["far"] < 5e-11


def test_quantiles_return_to_their_tails() -> None:
    rng = np.random.default_rng(22)
    for _ in range(60):
        df, prob = int(10 ** rng.uniform(0, 5)), float(10 ** rng.uniform(-12, -0.31))
        for upper, end in ((False, "low"), (True, "high")):
            x = mpmath.mpf(float(tails.chi_square_quantile(prob, df, end)))
            log_density = (
                (df / 2 - 1) * mpmath.log(x) - x / 2 - mpmath.loggamma(df / 2) - df / 2 * mpmath.log(2)
            )
            miss = abs(exact.chi_square_tail(x, df, upper) - mpmath.mpf(prob))
            assert miss / mpmath.exp(log_density) / x < 1e-14
        t = float(tails.student_quantile(prob, df, "high"))
        assert float(student_at_least(t, df)) == pytest.approx(prob, rel=1e-11)
        assert float(tails.normal_at_most(tails.normal_quantile(prob))) == pytest.approx(prob, rel=1e-13)
