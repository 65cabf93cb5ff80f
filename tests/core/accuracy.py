"""
Tail probabilities to fifty digits, for the tests of the float functions.

The rate is taken at the exact (dyadic) value of the float. A tail is the probability of its nearest count,
from mpmath's gamma function at 65 digits, times the sum of the term ratios in whole-number arithmetic with
220 binary places: nothing here is shared with the code under test.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

import mpmath

ONE = 1 << 220
DIGITS = 65

Ratio = Callable[[int], tuple[int, int]]  # numerator and denominator of f(next)/f(k) at k


def ratio_sum(k: int, step: int, ratio: Ratio) -> mpmath.mpf:
    """Return (f(k) + f(k+step) + ...) / f(k)."""
    term, total = ONE, 0
    while term > 0:
        total += term
        numerator, denominator = ratio(k)
        term = term * numerator // denominator
        k += step
    return mpmath.mpf(total) / ONE


def _tail(
    x: int, upper: bool, mean: float, pmf: Callable[[int], mpmath.mpf], up: Ratio, down: Ratio
) -> mpmath.mpf:
    """Sum the tail beyond the mean; the one that holds the mean is what this leaves of 1."""

    def beyond(k: int, step: int) -> mpmath.mpf:
        anchor = pmf(k)
        return anchor * ratio_sum(k, step, up if step > 0 else down) if anchor else anchor

    if upper:
        return beyond(x, 1) if x > mean else 1 - beyond(x - 1, -1)
    return beyond(x, -1) if x < mean else 1 - beyond(x + 1, 1)


def fraction(value: mpmath.mpf) -> Fraction:
    """Return the exact value of a positive number, whatever the working precision."""
    mantissa, exponent = value.man_exp
    return Fraction(mantissa) * Fraction(2) ** exponent


def log_factorial(k: int) -> mpmath.mpf:
    return mpmath.loggamma(k + 1)


def binomial_pmf(x: int, n: int, p: float) -> mpmath.mpf:
    """P(X = x), zero outside the support."""
    if not 0 <= x <= n:
        return mpmath.mpf(0)
    with mpmath.workdps(DIGITS):
        rate = mpmath.mpf(p)
        return mpmath.exp(
            log_factorial(n) - log_factorial(x) - log_factorial(n - x)
            + x * mpmath.log(rate) + (n - x) * mpmath.log(1 - rate)
        )  # fmt: skip


def binomial_tail(x: int, n: int, p: float, upper: bool) -> mpmath.mpf:
    """P(X >= x) or P(X <= x) for 0 < p < 1."""
    a, whole = p.as_integer_ratio()
    b = whole - a
    with mpmath.workdps(DIGITS):
        return _tail(
            x, upper, n * p, lambda k: binomial_pmf(k, n, p),
            lambda k: ((n - k) * a, (k + 1) * b), lambda k: (k * b, (n - k + 1) * a),
        )  # fmt: skip


def poisson_pmf(x: int, mean: float) -> mpmath.mpf:
    """P(X = x), zero outside the support."""
    if x < 0:
        return mpmath.mpf(0)
    with mpmath.workdps(DIGITS):
        rate = mpmath.mpf(mean)
        return mpmath.exp(x * mpmath.log(rate) - rate - log_factorial(x))


def poisson_tail(x: int, mean: float, upper: bool) -> mpmath.mpf:
    """P(X >= x) or P(X <= x) for mean > 0."""
    a, b = mean.as_integer_ratio()
    with mpmath.workdps(DIGITS):
        return _tail(
            x, upper, mean, lambda k: poisson_pmf(k, mean),
            lambda k: (a, (k + 1) * b), lambda k: (k * b, a),
        )  # fmt: skip


def hypergeometric_pmf(x: int, lot: int, defectives: int, n: int) -> mpmath.mpf:
    """P(X = x), zero outside the support."""
    good = lot - defectives
    if not max(0, n - good) <= x <= min(n, defectives):
        return mpmath.mpf(0)
    with mpmath.workdps(DIGITS):
        return mpmath.exp(
            log_factorial(defectives) - log_factorial(x) - log_factorial(defectives - x)
            + log_factorial(good) - log_factorial(n - x) - log_factorial(good - n + x)
            - log_factorial(lot) + log_factorial(n) + log_factorial(lot - n)
        )  # fmt: skip


def hypergeometric_tail(x: int, lot: int, defectives: int, n: int, upper: bool) -> mpmath.mpf:
    """P(X >= x) or P(X <= x)."""
    rest = lot - defectives - n
    with mpmath.workdps(DIGITS):
        return _tail(
            x, upper, n * defectives / lot, lambda k: hypergeometric_pmf(k, lot, defectives, n),
            lambda k: ((defectives - k) * (n - k), (k + 1) * (rest + k + 1)),
            lambda k: (k * (rest + k), (defectives - k + 1) * (n - k + 1)),
        )  # fmt: skip
