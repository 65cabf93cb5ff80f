"""
Tails of the hypergeometric law: the probability of `x` itself times a sum of term ratios.

See `steelyard.core.tails` for the arguments and the accuracy.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from steelyard.core.pmf import Floats, floats, hypergeometric_pmf

_CHUNK = 1024  # elements at a time, so that the working arrays stay in the processor's cache
_BLOCK = 1024  # term ratios at a time
_NEGLIGIBLE = 1e-17
_INVISIBLE = 1e-25  # what is taken from 1, even times a million


def hypergeometric_at_most(x: ArrayLike, lot: ArrayLike, defectives: ArrayLike, n: ArrayLike) -> Floats:
    """
    Chance of at most `x` defectives in `n` items drawn from a lot that holds `defectives` of them.

    Examples
    --------
    >>> round(float(hypergeometric_at_most(0, 60, 3, 32)), 12)
    0.095733489188
    """
    return _by_chunks(x, lot, defectives, n, upper=False)


def hypergeometric_at_least(x: ArrayLike, lot: ArrayLike, defectives: ArrayLike, n: ArrayLike) -> Floats:
    """
    Chance of at least `x` defectives in `n` items drawn from a lot that holds `defectives` of them.

    Examples
    --------
    >>> round(float(hypergeometric_at_least(1, 60, 1, 3)), 12)
    0.05
    """
    return _by_chunks(x, lot, defectives, n, upper=True)


def _by_chunks(x: ArrayLike, lot: ArrayLike, defectives: ArrayLike, n: ArrayLike, *, upper: bool) -> Floats:
    columns = np.broadcast_arrays(*floats(x, lot, defectives, n))
    shape = columns[0].shape
    count, size, marked, sample = (column.ravel() for column in columns)
    if upper:  # at least x defectives are at most n - x good items
        count, marked = sample - count, size - marked
    slack = -1.0 if upper else 1.0
    value = np.empty(count.size)
    for start in range(0, count.size, _CHUNK):
        chunk = slice(start, start + _CHUNK)
        value[chunk] = _at_most(count[chunk], size[chunk], marked[chunk], sample[chunk], slack)
    return value.reshape(shape)[()]


def _at_most(x: Floats, lot: Floats, marked: Floats, n: Floats, slack: float) -> Floats:
    """
    Return P(X <= x) for the marked items, or 1 - P(X > x) where `x` lies beyond the mean by `slack`.

    The slack, in standard deviations, prefers to sum over few defectives rather than many good items. At
    -1 the difference from 1 is still above 0.1, so no digits are lost.
    """
    size = np.maximum(lot, 1.0)
    mean = n * marked / size
    variance = mean * (1.0 - marked / size) * (lot - n) / np.maximum(lot - 1.0, 1.0)
    beyond = x > mean + slack * np.sqrt(variance)
    # P(X > x) is the chance of at most n - x - 1 of the other items
    count = np.where(beyond, n - x - 1.0, x)
    marked = np.where(beyond, lot - marked, marked)
    tail = hypergeometric_pmf(count, lot, marked, n)
    seen = tail > np.where(beyond, _INVISIBLE, 0.0)
    tail[seen] *= _ratio_sum(count[seen], lot[seen], marked[seen], n[seen])
    return np.where(beyond, 1.0 - tail, np.minimum(tail, 1.0))


def _ratio_sum(x: Floats, lot: Floats, marked: Floats, n: Floats) -> Floats:
    """Return P(X <= x) / P(X = x), the sum of the falling products of the term ratios."""
    up = (x, lot - marked - n + x)
    down = (marked - x + 1.0, n - x + 1.0)
    total, term, live, start = np.ones(x.size), np.ones(x.size), np.arange(x.size), 0
    while live.size:
        step = np.arange(start, start + max(4, _BLOCK // live.size))[:, np.newaxis]
        ratios = (up[0] - step) * (up[1] - step) / ((down[0] + step) * (down[1] + step))
        ratios[0] *= term
        terms = np.cumprod(ratios, axis=0)
        total[live] += terms.sum(axis=0)
        term = terms[-1]
        keep = np.flatnonzero(term > _NEGLIGIBLE * total[live])
        live, term = live[keep], term[keep]
        up, down = (up[0][keep], up[1][keep]), (down[0][keep], down[1][keep])
        start += step.size
    return total
