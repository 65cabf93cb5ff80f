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
    return np.where(k == x, np.exp(np.minimum(exponent, 0.0)), 0.0)


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
    exponent = -stirling(k) - deviance(k, mean, k - mean)
    return np.where(k == x, np.exp(np.minimum(exponent, 0.0)), 0.0)


def hypergeometric_pmf(x: ArrayLike, lot: ArrayLike, defectives: ArrayLike, n: ArrayLike) -> Floats:
    """
    Chance of exactly `x` defectives in `n` items drawn from a lot that holds `defectives` of them.

    Examples
    --------
    >>> round(float(hypergeometric_pmf(1, 60, 1, 3)), 12)
    0.05
    """
    x, lot, defectives, n = np.broadcast_arrays(*floats(x, lot, defectives, n))
    good, rest, size = lot - defectives, lot - n, np.maximum(lot, 1.0)
    k = np.clip(x, np.maximum(0.0, n - good), np.minimum(n, defectives))
    excess = (k * lot - n * defectives) / size
    share = defectives / size
    counts = np.array((k, n - k, defectives - k, good - n + k))
    means = np.array((n * share, n * (good / size), rest * share, rest * (good / size)))
    deviances = deviance(counts, means, np.array((excess, -excess, -excess, excess)))
    margins = stirling(np.array((defectives, good, n, rest))).sum(axis=0) - stirling(lot)
    exponent = margins - (stirling(counts) + deviances).sum(axis=0)
    return np.where(k == x, np.exp(np.minimum(exponent, 0.0)), 0.0)


def floats(*values: ArrayLike) -> tuple[Floats, ...]:
    """Return the values as float64 arrays, so that small integer types cannot lower the precision."""
    return tuple(np.asarray(value, dtype=np.float64) for value in values)


def stirling(count: Floats) -> Floats:
    """Return ``log(count!) - count log(count) + count``, which is 0 at zero and grows like its logarithm."""
    value = _TABLE[np.minimum(count, _TABLE.size - 1).astype(np.intp)]
    large = count >= _TABLE.size
    return np.where(large, stirling_series(np.maximum(count, 1.0)), value) if large.any() else value


def stirling_series(count: Floats) -> Floats:
    """Return the same for any real number from 16 on."""
    w = 1.0 / (count * count)
    series = (1 / 12 - w * (1 / 360 - w * (1 / 1260 - w * (1 / 1680 - w / 1188)))) / count
    return series + 0.5 * np.log(count) + _HALF_LOG_TWO_PI


def _stirling_table(size: int, exact: int = 16) -> Floats:
    small = [math.log(math.factorial(k) * math.exp(k) / k**k) for k in range(exact)]
    return np.concatenate((small, stirling_series(np.arange(exact, size, dtype=np.float64))))


_TABLE = _stirling_table(4096)


def deviance(count: Floats, mean: Floats, excess: Floats) -> Floats:
    """
    Return ``count log(count/mean) - count + mean``.

    `excess` is ``count - mean``, given apart because the caller knows it to more digits.
    """
    v = excess / (count + mean + _TINY)
    w = v * v
    tail = 1 / 9 + w * (1 / 11 + w * (1 / 13 + w * (1 / 15 + w / 17)))
    near = excess * v + 2.0 * count * v * w * (1 / 3 + w * (1 / 5 + w * (1 / 7 + w * tail)))
    far = w > 0.02
    if not far.any():
        return near
    return np.where(far, special.rel_entr(count, mean, where=far, out=np.zeros(far.shape)) - excess, near)
