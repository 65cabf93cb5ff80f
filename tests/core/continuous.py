"""Continuous laws to fifty digits, for the tests of measured plans; the code under test has no part in them.

Noncentral t is the integral over y of Phi(t y - delta) times the density of y, whose square times df is
chi-square. The range that matters is found on grids of floats and cut in pieces, for Gauss and Legendre's
rule at 55 digits. Chi-square is a series below its mean and a continued fraction above it.
"""

from __future__ import annotations

import csv
import functools
import itertools
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import mpmath
import numpy as np
import pytest
from scipy import special  # noqa: TID251 - logarithms of the normal law, on grids

ROWS = Path(__file__).parents[2] / "workbooks" / "data" / "check_values.csv"
DIGITS = 55
_DROP = 140.0  # e^-140 of the peak is less than 1e-60
_PIECES, _NODES = 8, 30


def relative_error(got: float, exact: mpmath.mpf) -> float:
    return float(abs(mpmath.mpf(float(got)) - exact) / exact)


def normal_tail(z: mpmath.mpf, upper: bool) -> mpmath.mpf:
    """P(Z >= z) or P(Z <= z)."""
    with mpmath.workdps(DIGITS):
        return mpmath.erfc((z if upper else -z) / mpmath.sqrt(2)) / 2


def t_tail(t: float, df: int, delta: Any, upper: bool) -> mpmath.mpf:
    """P(T >= t) or P(T <= t) of noncentral t."""
    with mpmath.workdps(DIGITS):
        t, delta = mpmath.mpf(t), mpmath.mpf(delta)
        if upper:
            t, delta = -t, -delta
        half = mpmath.mpf(df) / 2
        log_scale = mpmath.log(2) + half * mpmath.log(half) - mpmath.loggamma(half)

        def integrand(y: mpmath.mpf) -> mpmath.mpf:
            density = mpmath.exp(log_scale + (df - 1) * mpmath.log(y) - df * y * y / 2)
            return mpmath.erfc((delta - t * y) / mpmath.sqrt(2)) / 2 * density

        return integral(integrand, _edges(float(t), df, float(delta)))


def integral(function: Any, edges: Sequence[float]) -> mpmath.mpf:
    """Integrate piece by piece; the pieces must be short against the function's waves."""
    total = mpmath.mpf(0)
    for a, b in itertools.pairwise(edges):
        half, middle = (mpmath.mpf(b) - mpmath.mpf(a)) / 2, (mpmath.mpf(b) + mpmath.mpf(a)) / 2
        total += half * sum(weight * function(middle + half * node) for node, weight in _gauss(_NODES))
    return total


def _edges(t: float, df: int, delta: float) -> Sequence[float]:
    """Cut the range that matters in equal pieces, and where Phi rises."""
    least = 1e-60
    low, high = least, max(1.0, delta / t if t else 0.0) + float(np.sqrt(2 * _DROP / df))
    for _ in range(4):
        grid = np.linspace(low, high, 20_001)
        log_weight = special.log_ndtr(t * grid - delta) + (df - 1) * np.log(grid) - df * grid * grid / 2
        inside = np.flatnonzero(log_weight >= log_weight.max() - _DROP)
        low, high = grid[max(inside[0] - 1, 0)], grid[min(inside[-1] + 1, len(grid) - 1)]
    steps = [(delta + z) / t for z in (-16, -11, -7, -4, -1.5, 1.5, 4, 7, 11, 16)] if t else []
    return sorted({*np.linspace(low, high, _PIECES + 1), *(step for step in steps if low < step < high)})


@functools.cache
def _gauss(count: int) -> list[tuple[mpmath.mpf, mpmath.mpf]]:
    """Return nodes and weights, numpy's polished by Newton's method."""
    found = []
    with mpmath.workdps(DIGITS + 5):
        for start in np.polynomial.legendre.leggauss(count)[0]:
            x = mpmath.mpf(float(start))
            for _ in range(4):
                before, now = mpmath.mpf(1), x
                for k in range(2, count + 1):
                    before, now = now, ((2 * k - 1) * x * now - (k - 1) * before) / k
                slope = count * (x * now - before) / (x * x - 1)
                x -= now / slope
            found.append((x, 2 / ((1 - x * x) * slope * slope)))
    return found


def chi_square_tail(x: mpmath.mpf, df: int, upper: bool) -> mpmath.mpf:
    """P(X >= x) or P(X <= x)."""
    with mpmath.workdps(DIGITS + 10):
        a, half = mpmath.mpf(df) / 2, mpmath.mpf(x) / 2
        front = mpmath.exp(a * mpmath.log(half) - half - mpmath.loggamma(a))
        if half > a + 1:
            above = front * _fraction(a, half)
            return above if upper else 1 - above
        below = front * _series(a, half)
        return 1 - below if upper else below


def _series(a: mpmath.mpf, x: mpmath.mpf) -> mpmath.mpf:
    total = term = 1 / a
    while term > total * mpmath.mpf(10) ** -(DIGITS + 5):
        a += 1
        term *= x / a
        total += term
    return total


def _fraction(a: mpmath.mpf, x: mpmath.mpf) -> mpmath.mpf:
    """Return Legendre's continued fraction by Lentz's method."""
    b = x + 1 - a
    c, d = mpmath.mpf(10) ** 400, 1 / b
    value, k = d, 0
    while True:
        k += 1
        numerator = -k * (k - a)
        b += 2
        d = 1 / (numerator * d + b)
        c = b + numerator / c
        value *= c * d
        if abs(c * d - 1) < mpmath.mpf(10) ** -DIGITS:
            return value


def check_rows(checks: dict[str, Any]) -> list[Any]:
    """Return the published rows that have a check, each with its source in the test's id."""
    with ROWS.open(encoding="utf-8", newline="") as file:
        found = {row["id"]: row for row in csv.DictReader(file) if row["id"] in checks}
    assert found.keys() == checks.keys()
    ids = {name: f"{name}, {row['read_or_memory']}: {row['source']}" for name, row in found.items()}
    return [pytest.param(row, id=ids[name]) for name, row in found.items()]


def half_a_unit(number: str) -> float:
    """Return half a unit of a printed number's last digit."""
    return 0.5000001 * 10.0 ** -len(number.partition(".")[2])
