"""
Tails of the hypergeometric law: the probability of `x` itself times a sum of term ratios.

See `steelyard.core.tails` for the arguments and the accuracy.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from steelyard.core.pmf import Floats, floats, hypergeometric_pmf

_CHUNK = 2048  # elements at a time: a block of ratios stays in the processor's cache
_BLOCK = 32768  # ratios at a time
_DIGITS = 1e-17


def hypergeometric_at_most(x: ArrayLike, lot: ArrayLike, defectives: ArrayLike, n: ArrayLike) -> Floats:
    """
    Chance of at most `x` defectives in `n` items drawn from a lot that holds `defectives` of them.

    Examples
    --------
    >>> round(float(hypergeometric_at_most(0, 60, 3, 32)), 12)
    0.095733489188
    """
    x, lot, defectives, n = floats(x, lot, defectives, n)
    # Count from the nearer end: beyond the mean, the good items of the sample instead of the defectives.
    # What is then taken from 1 is a tail beyond the mean, so the difference is never small.
    beyond = x > n * defectives / np.maximum(lot, 1.0)
    count = np.where(beyond, n - x - 1.0, x)
    marked = np.where(beyond, lot - defectives, defectives)
    lowest = np.maximum(0.0, n + marked - lot)
    ratio_sum = _ratio_sum(*np.broadcast_arrays(np.maximum(count, lowest), lot, marked, n))
    tail = np.minimum(hypergeometric_pmf(count, lot, marked, n) * ratio_sum, 1.0)
    return np.where(beyond, 1.0 - tail, tail)


def hypergeometric_at_least(x: ArrayLike, lot: ArrayLike, defectives: ArrayLike, n: ArrayLike) -> Floats:
    """
    Chance of at least `x` defectives in `n` items drawn from a lot that holds `defectives` of them.

    Examples
    --------
    >>> round(float(hypergeometric_at_least(1, 60, 1, 3)), 12)
    0.05
    """
    x, lot, defectives, n = floats(x, lot, defectives, n)
    return hypergeometric_at_most(n - x, lot, lot - defectives, n)


def _ratio_sum(x: Floats, lot: Floats, defectives: Floats, n: Floats) -> Floats:
    """Return P(X <= x) / P(X = x) for `x` below the mean."""
    total = np.empty(x.size)
    columns = [np.ravel(part) for part in (x, lot - n - defectives + x, defectives - x, n - x)]
    for start in range(0, x.size, _CHUNK):
        chunk = slice(start, start + _CHUNK)
        total[chunk] = _chunk_sum(*(column[chunk] for column in columns))
    return total.reshape(x.shape)


def _chunk_sum(bad: Floats, good: Floats, bad_left: Floats, good_left: Floats) -> Floats:
    """Add up the falling products of ``bad good / ((bad_left+1)(good_left+1))``, a block at a time."""
    total, last = np.ones(bad.size), np.ones(bad.size)
    steps = np.minimum(bad, good).max() if bad.size else 0.0
    size = max(8, _BLOCK // max(1, bad.size))
    start = 0
    while start < steps and (last > _DIGITS * total).any():
        step = np.arange(start, min(start + size, steps))[:, np.newaxis]
        ratios = (bad - step) * (good - step) / ((bad_left + step + 1.0) * (good_left + step + 1.0))
        terms = last * np.cumprod(ratios, axis=0)
        total += terms.sum(axis=0)
        last = terms[-1]
        start += size
    return total
