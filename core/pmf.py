"""
Chance of exactly `x` events under the binomial, the Poisson and the hypergeometric law.

Differences of large log-factorials lose digits as the counts grow. Following Loader, every law is
therefore written with two quantities that stay small: the correction of Stirling's formula at each count,
and the deviance of each count from its mean. What the arguments may be: see `steelyard.core.tails`, which
builds the tails on these functions.

References
----------
C. Loader, "Fast and accurate computation of binomial probabilities", 2000 (from memory).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special  # noqa: TID251 - rel_entr is x log(x/y) that keeps quiet at zero

Floats = NDArray[np.float64]

_TINY = 1e-300
_SERIES_FROM = 16
_SMALL = np.array([math.log(math.factorial(k) * math.exp(k) / k**k) for k in range(_SERIES_FROM)])
_HALF_LOG_TWO_PI = 0.5 * math.log(2 * math.pi)


def binomial_pmf(x: ArrayLike, n: ArrayLike, p: ArrayLike) -> Floats:
    """
    Chance of exactly `x` defectives in `n` items at the rate `p`.

    Examples
    --------
    >>> round(float(binomial_pmf(1, 50, 0.02)), 12)
    0.371601714375
    """
    x, n, p = floats(x, n, p)
    high = p.astype(np.float32).astype(np.float64)  # n * high and n * (p - high) are exact products
    k = np.clip(x, 0.0, n)
    excess = (k - n * high) - n * (p - high)
    coefficient = stirling(n) - stirling(k) - stirling(n - k)
    exponent = coefficient - deviance(k, n * p, excess) - deviance(n - k, n * (1.0 - p), -excess)
    return np.where(k == x, np.exp(exponent), 0.0)


def poisson_pmf(x: ArrayLike, mean: ArrayLike) -> Floats:
    """
    Chance of exactly `x` events where `mean` are expected.

    Examples
    --------
    >>> round(float(poisson_pmf(0, 3.0)), 12)
    0.049787068368
    """
    x, mean = floats(x, mean)
    k = np.maximum(x, 0.0)
    return np.where(k == x, np.exp(-stirling(k) - deviance(k, mean, k - mean)), 0.0)


def hypergeometric_pmf(x: ArrayLike, lot: ArrayLike, defectives: ArrayLike, n: ArrayLike) -> Floats:
    """
    Chance of exactly `x` defectives in `n` items drawn from a lot that holds `defectives` of them.

    Examples
    --------
    >>> round(float(hypergeometric_pmf(1, 60, 1, 3)), 12)
    0.05
    """
    x, lot, defectives, n = floats(x, lot, defectives, n)
    good, rest, size = lot - defectives, lot - n, np.maximum(lot, 1.0)
    k = np.clip(x, np.maximum(0.0, n - good), np.minimum(n, defectives))
    excess = (k * lot - n * defectives) / size
    exponent = stirling(n) + stirling(rest) - stirling(lot) + stirling(defectives) + stirling(good)
    for row, column, sign, count in (
        (n, defectives, 1.0, k),
        (n, good, -1.0, n - k),
        (rest, defectives, -1.0, defectives - k),
        (rest, good, 1.0, good - n + k),
    ):
        exponent = exponent - stirling(count) - deviance(count, row * column / size, sign * excess)
    return np.where(k == x, np.exp(exponent), 0.0)


def floats(*values: ArrayLike) -> tuple[Floats, ...]:
    """Return the values as float64 arrays, so that small integer types cannot lower the precision."""
    return tuple(np.asarray(value, dtype=np.float64) for value in values)


def stirling(count: Floats) -> Floats:
    """Return ``log(count!) - count log(count) + count``, which is 0 at zero and grows like its logarithm."""
    large = np.maximum(count, _SERIES_FROM)
    inverse = 1.0 / large
    w = inverse * inverse
    series = inverse * (1 / 12 - w * (1 / 360 - w * (1 / 1260 - w * (1 / 1680 - w / 1188))))
    small = _SMALL[np.minimum(count, _SERIES_FROM - 1).astype(np.intp)]
    return np.where(count < _SERIES_FROM, small, series + 0.5 * np.log(large) + _HALF_LOG_TWO_PI)


def deviance(count: Floats, mean: Floats, excess: Floats) -> Floats:
    """
    Return ``count log(count/mean) - count + mean``.

    `excess` is ``count - mean``, given apart because the caller knows it to more digits.
    """
    v = excess / (count + mean + _TINY)
    w = v * v
    tail = 1 / 9 + w * (1 / 11 + w * (1 / 13 + w * (1 / 15 + w / 17)))
    near = excess * v + 2.0 * count * v * w * (1 / 3 + w * (1 / 5 + w * (1 / 7 + w * tail)))
    return np.where(np.abs(v) < 0.15, near, special.rel_entr(count, mean) - excess)
