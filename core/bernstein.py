"""The greatest value of a polynomial between 0 and 1, certified.

The chance of a set of counts, as a function of the rate, is a polynomial ``sum of b[m] P(M = m)`` with M
binomial. Between 0 and 1 it lies between the least and the greatest of its coefficients b, and equals the
outer ones at the ends. Halving the interval (de Casteljau) gives the coefficients of either half; they
approach the polynomial as the square of the width, so that no peak can hide between points of a grid.
All weights are positive: nothing cancels.
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from steelyard.core.parameter import Floats
from steelyard.core.pmf import binomial_pmf

CERTAIN = 1e-12  # relative; what is as close as this to a bound counts as equal to it
_LEVELS = 60


def greatest(coefficients: Floats) -> float:
    """Return the greatest value; it is attained, and nowhere exceeded by a share of more than 1e-12.

    Parameters
    ----------
    coefficients : ndarray of float, shape (degree + 1,)
        None negative.

    Examples
    --------
    >>> round(greatest(np.array([0.0, 1.0, 0.0])), 12)  # 2 p (1 - p)
    0.5
    """
    return max(attained for attained, _ in _narrowing(coefficients))


def stays_within(coefficients: Floats, bound: float) -> bool:
    """Tell whether the polynomial exceeds a bound nowhere between 0 and 1; a tie stays within it.

    Examples
    --------
    >>> stays_within(np.array([0.0, 1.0, 0.0]), 0.5), stays_within(np.array([0.0, 1.0, 0.0]), 0.49)
    (True, False)
    """
    limit = bound * (1 + CERTAIN)
    for attained, ceiling in _narrowing(coefficients):
        if attained > limit:
            return False
        if ceiling <= limit:
            return True
    return True


def restricted(degree: int, low: float, high: float) -> Floats:
    """Return the matrix that turns coefficients on 0 to 1 into those on a part with one end at 0 or 1.

    Parameters
    ----------
    degree : int
    low, high : float
        ``low`` is 0 or ``high`` is 1.

    Returns
    -------
    ndarray of float, shape (degree + 1, degree + 1)
    """
    i = np.arange(degree + 1.0)[:, None]
    k = np.arange(degree + 1.0)
    if low == 0:
        return np.where(k <= i, binomial_pmf(np.minimum(k, i), i, np.asarray(high)), 0.0)
    return np.where(k >= i, binomial_pmf(np.maximum(k - i, 0.0), degree - i, np.asarray(low)), 0.0)


def _narrowing(coefficients: Floats) -> Iterator[tuple[float, float]]:
    """Give the greatest value attained so far, and what no value exceeds, ever closer to each other."""
    parts = np.asarray(coefficients, dtype=float)[None]
    halves = _halving(parts.shape[1] - 1)
    attained = 0.0
    for _ in range(_LEVELS):
        attained = max(attained, float(parts[:, [0, -1]].max()))
        ceilings = parts.max(axis=1)
        yield attained, max(attained, float(ceilings.max()))
        parts = parts[ceilings > attained * (1 + CERTAIN)]
        if not len(parts):
            return
        parts = np.concatenate((parts @ halves, (parts[:, ::-1] @ halves)[:, ::-1]))


@lru_cache(maxsize=8)
def _halving(degree: int) -> NDArray[np.float64]:
    return np.ascontiguousarray(restricted(degree, 0.0, 0.5).T)
