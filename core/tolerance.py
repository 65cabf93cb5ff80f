"""The two-sided tolerance factor: how much of what is measured lies near the mean, with confidence.

With confidence, all but a given fraction of the values lies between ``mean - k s`` and ``mean + k s``. Given
the error x of the mean, that is true when s is at least r(x)/k, where that fraction lies outside x - r and
x + r; so the confidence is one integral over x. (With one limit the factor is the k of a plan by measurement
that demonstrates a fraction, see `steelyard.core.quality`.)

References
----------
K. R. Eberhardt, R. W. Mee and C. P. Reeve, Communications in Statistics B 18 (1989), 397-413 (from memory).
"""

from __future__ import annotations

import numpy as np

from steelyard.core.parameter import Floats
from steelyard.core.roots import bracket, root
from steelyard.core.tails_continuous import (
    chi_square_at_least,
    chi_square_at_most,
    chi_square_quantile,
    normal_at_most,
    normal_quantile,
)

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(96)
_REACH = 9.0  # standard errors of the mean; beyond lies 1e-19
_ROUNDS = 60
_STEP = 0.01  # of the logarithm of k
_TINY = 1e-300


def two_sided_factor(n: int, outside: float, confidence: float) -> float:
    """Return k: with confidence, at most the fraction `outside` is farther than k s from the mean.

    Parameters
    ----------
    n : int
        Items measured, at least 2.
    outside, confidence : float
        Strictly between 0 and 1.

    Examples
    --------
    >>> round(two_sided_factor(10, 0.05, 0.95), 3)
    3.393
    """
    x = _REACH / 2 * (1 + _NODES)  # in standard errors; half of the symmetric integral
    weight = _WEIGHTS * _REACH * np.exp(-x * x / 2) / np.sqrt(2 * np.pi)
    reach = half_width(x / np.sqrt(n), outside)
    # The smaller of the confidence and what it lacks decides.
    tail, target, rising = (
        (chi_square_at_least, confidence, 1.0)
        if confidence <= 0.5
        else (chi_square_at_most, 1 - confidence, -1.0)
    )

    def surplus(log_k: Floats) -> Floats:
        least = (n - 1) * (reach / np.exp(log_k)[..., None]) ** 2
        chance = (tail(least, n - 1) * weight).sum(axis=-1)
        return np.asarray(rising * np.log(np.maximum(chance, _TINY) / target))

    s = np.sqrt(chi_square_quantile(1 - confidence, n - 1, "low") / (n - 1))
    start = np.log(-normal_quantile(outside / 2) * np.sqrt(1 + 1 / n) / s)
    return float(np.exp(root(surplus, *bracket(surplus, start, np.asarray(_STEP)))))


def half_width(x: Floats, outside: float) -> Floats:
    """Return r: the standard normal has the fraction `outside` beyond x - r and x + r.

    Newton's method from above; after its first step it comes from below, where the fraction is convex in r.
    """
    r = np.asarray(x - normal_quantile(outside / 2))
    for _ in range(_ROUNDS):
        found = normal_at_most(x - r) + normal_at_most(-x - r)
        slope = (np.exp(-((x - r) ** 2) / 2) + np.exp(-((x + r) ** 2) / 2)) / np.sqrt(2 * np.pi)
        new = r + (found - outside) / slope
        if np.array_equal(new, r):
            break
        r = new
    return r
