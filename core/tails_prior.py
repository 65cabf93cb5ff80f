"""
Probabilities where the rate itself is uncertain: a beta law for a proportion, a gamma law for a mean.

The count of defectives among n items is then beta-binomial. Its chances follow from three negative binomial
ones with the same excess: the defectives, the good items, and both together; no large logarithms are
subtracted. Tails are sums of term ratios, from the count on outwards or up to the mean.

All functions broadcast and give no warnings; `a` and `b` are positive.

Relative error at most 1e-11 for probabilities of at least 1e-200 (n to 100,000, `a` and `b` 0.01 to 10,000).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from scipy import special  # noqa: TID251 - this module wraps it for uncertain rates

from steelyard.core.pmf import Floats, floats
from steelyard.core.tails_clustered import negative_binomial_pmf

_BLOCK = 4096
_NEGLIGIBLE = 1e-17


def beta_at_most(p: ArrayLike, a: ArrayLike, b: ArrayLike) -> Floats:
    """Chance that a proportion with the law beta(a, b) is at most `p`."""
    return np.asarray(special.betainc(*floats(a, b, p)))


def beta_at_least(p: ArrayLike, a: ArrayLike, b: ArrayLike) -> Floats:
    """Chance that a proportion with the law beta(a, b) is at least `p`."""
    return np.asarray(special.betaincc(*floats(a, b, p)))


def gamma_at_most(rate: ArrayLike, a: ArrayLike, b: ArrayLike) -> Floats:
    """Chance that a mean with the law gamma (shape a, mean a/b) is at most `rate`."""
    rate, a, b = floats(rate, a, b)
    return np.asarray(special.gammainc(a, b * rate))


def gamma_at_least(rate: ArrayLike, a: ArrayLike, b: ArrayLike) -> Floats:
    """Chance that a mean with the law gamma (shape a, mean a/b) is at least `rate`."""
    rate, a, b = floats(rate, a, b)
    return np.asarray(special.gammaincc(a, b * rate))


def beta_binomial_pmf(x: ArrayLike, n: ArrayLike, a: ArrayLike, b: ArrayLike) -> Floats:
    """
    Chance of exactly `x` defectives among `n` items.

    Examples
    --------
    >>> round(float(beta_binomial_pmf(1, 2, 1.0, 1.0)), 12)
    0.333333333333
    """
    x, n, a, b = floats(x, n, a, b)
    excess = n / (a + b)
    count = np.clip(x, 0.0, n)
    parts = [negative_binomial_pmf(k, shape * excess, excess) for k, shape in ((count, a), (n - count, b))]
    return np.where(count == x, parts[0] * parts[1] / negative_binomial_pmf(n, n, excess), 0.0)


def beta_binomial_at_most(x: ArrayLike, n: ArrayLike, a: ArrayLike, b: ArrayLike) -> Floats:
    """
    Chance of at most `x` defectives among `n` items.

    Examples
    --------
    >>> round(float(beta_binomial_at_most(1, 4, 1.0, 1.0)), 12)
    0.4
    """
    x, n, a, b = floats(x, n, a, b)
    # So many defectives at most are so many good items at least.
    return beta_binomial_at_least(n - x, n, b, a)


def beta_binomial_at_least(x: ArrayLike, n: ArrayLike, a: ArrayLike, b: ArrayLike) -> Floats:
    """
    Chance of at least `x` defectives among `n` items.

    Examples
    --------
    >>> round(float(beta_binomial_at_least(1, 4, 1.0, 1.0)), 12)
    0.8
    """
    x, n, a, b = np.broadcast_arrays(*floats(x, n, a, b))
    shape, (x, n, a, b) = x.shape, (array.ravel() for array in (x, n, a, b))
    far = x > n * a / (a + b)
    count = np.where(far, x, n - x + 1)  # else what is left: at least so many good items
    first, second = np.where(far, a, b), np.where(far, b, a)
    tail = beta_binomial_pmf(count, n, first, second)
    seen = tail > 0
    tail[seen] *= _ratio_sum(count[seen], n[seen], first[seen], second[seen])
    value = np.where(far, np.minimum(tail, 1.0), 1.0 - np.minimum(tail, 1.0))
    return np.where(x <= 0, 1.0, np.where(x > n, 0.0, value)).reshape(shape)[()]


def _ratio_sum(x: Floats, n: Floats, a: Floats, b: Floats) -> Floats:
    """Return P(X >= x) / P(X = x), the sum of the products of the term ratios."""
    total, term, start = np.ones(x.size), np.ones(x.size), 0
    live = np.arange(x.size)
    while live.size:
        k = x[live] + (start + np.arange(max(4, _BLOCK // live.size)))[:, None]
        inside, size = k < n[live], n[live]
        rising = (size - k) * (a[live] + k)
        falling = np.where(inside, (k + 1) * (b[live] + size - k - 1), 1.0)
        ratios = np.where(inside, rising, 0.0) / falling
        ratios[0] *= term[live]
        terms = np.cumprod(ratios, axis=0)
        total[live] += terms.sum(axis=0)
        term[live] = terms[-1]
        start += len(k)
        live = live[term[live] > _NEGLIGIBLE * total[live]]
    return total
