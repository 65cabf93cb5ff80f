"""
Probabilities of the three count laws: binomial, Poisson and hypergeometric.

Each law answers three questions: the chance of at most, of at least and of exactly `x` events. No small
tail is ever one minus the other. All functions broadcast, return float64 and give no warnings. They expect
arguments that were checked before: whole `x` of any size (outside the support the answer is exactly 0 or
1), whole ``n >= 0``, ``0 <= p <= 1``, ``mean >= 0``, whole `defectives` and `n` in 0..lot.

Relative error at the exact value of the float rate: at most 1e-12 for probabilities of at least 1e-30 and
at most 1e-11 down to 1e-290 (n to 100,000, means to 100,000, lots to 1,000,000).

Method: the incomplete beta and gamma functions of scipy, which are fast and, in the body, accurate. Far
out they lose digits or drop to zero; there the tail is the probability of `x` itself times Gauss's
continued fraction for the sum of the term ratios.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special  # noqa: TID251 - this module and pmf.py wrap it for the count laws

from steelyard.core.pmf import Floats, binomial_pmf, floats, hypergeometric_pmf, poisson_pmf
from steelyard.core.tails_hypergeometric import hypergeometric_at_least, hypergeometric_at_most

__all__ = [
    "binomial_at_least",
    "binomial_at_most",
    "binomial_pmf",
    "hypergeometric_at_least",
    "hypergeometric_at_most",
    "hypergeometric_pmf",
    "poisson_at_least",
    "poisson_at_most",
    "poisson_pmf",
]

_FAR_BINOMIAL = 1e-200  # below: betainc loses digits and can return 0
_LARGE_SAMPLE = 10_000  # above: betainc loses up to 4e-12 at ppm rates where it gives 0.5 to 0.95
_FAR_POISSON = 1e-16  # below: gammainc and gammaincc pass 1e-12 at large means
_LEVELS = 16  # of the continued fraction; full precision from eight standard deviations outwards
_CHUNK = 4096  # elements of the far tail at a time, so that they stay in the cache
_TINY = 1e-300
_ENDLESS = np.array(np.finfo(float).max)  # so that infinity lies beyond

Kernel = Callable[..., Floats]


def binomial_at_most(x: ArrayLike, n: ArrayLike, p: ArrayLike) -> Floats:
    """
    Chance of at most `x` defectives in `n` items at the rate `p`.

    Examples
    --------
    >>> round(float(binomial_at_most(3, 50, 0.02)), 12)
    0.982241919302
    """
    x, n, p = floats(x, n, p)
    return _inside(_binomial_lower, x, 0.0, n - 1.0, (0.0, 1.0), np.maximum(n, 1.0), p)


def binomial_at_least(x: ArrayLike, n: ArrayLike, p: ArrayLike) -> Floats:
    """
    Chance of at least `x` defectives in `n` items at the rate `p`.

    Examples
    --------
    >>> round(float(binomial_at_least(4, 50, 0.02)), 12)
    0.017758080698
    """
    x, n, p = floats(x, n, p)
    return _inside(_binomial_upper, x, 1.0, n, (1.0, 0.0), np.maximum(n, 1.0), p)


def poisson_at_most(x: ArrayLike, mean: ArrayLike) -> Floats:
    """
    Chance of at most `x` events where `mean` are expected.

    Examples
    --------
    >>> round(float(poisson_at_most(2, 6.0)), 12)
    0.061968804417
    """
    x, mean = floats(x, mean)
    return _inside(_poisson_lower, x, 0.0, _ENDLESS, (0.0, 1.0), mean)


def poisson_at_least(x: ArrayLike, mean: ArrayLike) -> Floats:
    """
    Chance of at least `x` events where `mean` are expected.

    Examples
    --------
    >>> round(float(poisson_at_least(11, 6.0)), 12)
    0.042620923583
    """
    x, mean = floats(x, mean)
    return _inside(_poisson_upper, x, 1.0, _ENDLESS, (1.0, 0.0), mean)


def _inside(
    kernel: Kernel, x: Floats, low: float, high: Floats, ends: tuple[float, float], *rest: Floats
) -> Floats:
    """Apply the kernel where ``low <= x <= high``; `ends` are the values below and above."""
    below, above = x < low, x > high
    if not _any(below | above):
        return kernel(x, *rest)
    value = kernel(np.where(below | above, low, x), *rest)  # any x that the kernel takes will do outside
    return np.where(below, ends[0], np.where(above, ends[1], value))


def _any(mask: NDArray[np.bool_]) -> bool:
    """Return whether one is true; a scalar is its own answer, which spares it the reduction."""
    return bool(mask.any() if mask.ndim else mask)


def _binomial_upper(x: Floats, n: Floats, p: Floats) -> Floats:
    value = special.betainc(x, n - x + 1.0, p)
    large = n > _LARGE_SAMPLE
    if _any(large):
        body = large & (value > 0.5) & (value < 0.999)
        value = _mend(value, body, lambda x, n, p: 1.0 - _binomial_lower(x - 1.0, n, p), x, n, p)
    return _mend(value, value < _FAR_BINOMIAL, _binomial_far, x, n, p)


def _binomial_lower(x: Floats, n: Floats, p: Floats) -> Floats:
    q = 1.0 - p
    value = special.betainc(n - x, x + 1.0, q)
    rounding = (1.0 - q) - p  # exactly what q lacks; it matters once n is in the thousands
    if _any(np.abs(rounding) > 1e-13 / n):
        log_p, log_q = np.log(np.maximum(p, _TINY)), np.log(np.maximum(q, _TINY))
        density = np.exp(x * log_p + (n - x - 1.0) * log_q - special.betaln(n - x, x + 1.0))
        value = np.minimum(value + rounding * density, 1.0)
    return _mend(value, value < _FAR_BINOMIAL, _binomial_far_lower, x, n, p)


def _poisson_upper(x: Floats, mean: Floats) -> Floats:
    value = special.gammainc(x, mean)
    return _mend(value, value < _FAR_POISSON, _poisson_far, x, mean)


def _poisson_lower(x: Floats, mean: Floats) -> Floats:
    value = special.gammaincc(x + 1.0, mean)
    return _mend(value, value < _FAR_POISSON, _poisson_far_lower, x, mean)


def _mend(value: Floats, wrong: NDArray[np.bool_], form: Kernel, *arguments: Floats) -> Floats:
    """Replace the values that may be wrong by another form of the same tail."""
    if not _any(wrong):
        return value
    value, wrong = np.array(value), np.asarray(wrong)
    columns = [np.broadcast_to(argument, value.shape)[wrong] for argument in arguments]
    mended = np.empty(columns[0].size)
    for start in range(0, mended.size, _CHUNK):
        chunk = slice(start, start + _CHUNK)
        mended[chunk] = form(*(column[chunk] for column in columns))
    value[wrong] = mended
    return value[()]


def _binomial_far(x: Floats, n: Floats, p: Floats) -> Floats:
    return _extend(binomial_pmf(x, n, p), _binomial_ratio_sum, x, n, p / (1.0 - p))


def _binomial_far_lower(x: Floats, n: Floats, p: Floats) -> Floats:
    return _extend(binomial_pmf(x, n, p), _binomial_ratio_sum, n - x, n, (1.0 - p) / p)


def _poisson_far(x: Floats, mean: Floats) -> Floats:
    return _extend(poisson_pmf(x, mean), _poisson_ratio_sum, x, mean)


def _poisson_far_lower(x: Floats, mean: Floats) -> Floats:
    return _extend(poisson_pmf(x, mean), _poisson_ratio_sum_lower, x, mean)


def _extend(point: Floats, ratio_sum: Kernel, *arguments: Floats) -> Floats:
    """Return P(X = x) times the tail's sum of term ratios, computed only where that product is not zero."""
    seen = point > 0.0
    point[seen] *= ratio_sum(*(argument[seen] for argument in arguments))
    return point


def _binomial_ratio_sum(x: Floats, n: Floats, odds: Floats) -> Floats:
    return _fraction(
        lambda m: odds * (n - x - m) * (x + m) / ((x + 2 * m) * (x + 2 * m + 1)),
        lambda m: odds * (n + m) * m / ((x + 2 * m - 1) * (x + 2 * m)),
    )


def _poisson_ratio_sum(x: Floats, mean: Floats) -> Floats:
    return _fraction(
        lambda m: mean * (x + m) / ((x + 2 * m) * (x + 2 * m + 1)),
        lambda m: mean * m / ((x + 2 * m - 1) * (x + 2 * m)),
    )


def _poisson_ratio_sum_lower(x: Floats, mean: Floats) -> Floats:
    return _fraction(lambda m: (x - m) / mean, lambda m: m / mean)


def _fraction(odd: Callable[[int], Floats], even: Callable[[int], Floats]) -> Floats:
    """Return ``1/(1 - odd(0)/(1 + even(1)/(1 - odd(1)/(1 + even(2)/...))))``, evaluated from inside."""
    inner = 1.0 - odd(_LEVELS)
    for m in range(_LEVELS, 0, -1):
        inner = 1.0 - odd(m - 1) / (1.0 + even(m) / inner)
    return 1.0 / inner
