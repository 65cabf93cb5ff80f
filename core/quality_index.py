"""Acceptance by measurement, the k method: the chance that a lot's quality index reaches k.

The index of a limit is the sample mean's distance from it in standard deviations, ``(upper - mean) / s``; the
lot is accepted when the index of every limit is at least k. The chance follows from the fraction p that lies
outside the limits:

- one limit, sigma known: by the normal law; sigma unknown: by noncentral t;
- two limits, sigma known: p says how far the mean is off the middle, and so the chance;
- two limits, sigma unknown: p leaves the chance open within a band, see `steelyard.core.quality_band`.

All values broadcast. Relative error: at most 1e-10, for n to 100,000 and chances from 1e-290.

References
----------
G. J. Lieberman and G. J. Resnikoff, J. Amer. Statist. Assoc. 50 (1955), 457-516; ISO 3951-1 and -2 (from
memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from steelyard.core.parameter import Floats
from steelyard.core.tails_continuous import normal_at_least, normal_at_most, normal_quantile
from steelyard.core.tails_noncentral import student_at_least, student_at_most

_MEAN_ROUNDS = 60


def known(n: ArrayLike, k: ArrayLike, p: ArrayLike, passing: bool) -> Floats:
    """Return the chance that a lot passes, or fails, with one limit and sigma known.

    Examples
    --------
    >>> round(float(known(12, 1.9, 0.01, True)), 6)
    0.93015
    """
    away = np.sqrt(n) * (-normal_quantile(p) - np.asarray(k))
    return normal_at_most(away if passing else -away)


def unknown(n: ArrayLike, k: ArrayLike, p: ArrayLike, passing: bool) -> Floats:
    """Return the chance that a lot passes, or fails, with one limit and sigma unknown.

    Examples
    --------
    >>> round(float(unknown(40, 1.9, 0.01, True)), 4)
    0.9484
    """
    n = np.asarray(n, dtype=float)
    tail = student_at_least if passing else student_at_most
    return tail(np.sqrt(n) * k, n - 1, -np.sqrt(n) * normal_quantile(p))


def least_fraction(width: ArrayLike) -> Floats:
    """Return the least fraction outside two limits that lie `width` standard deviations apart."""
    return 2 * normal_at_most(-np.asarray(width) / 2)


def known_between(n: ArrayLike, k: ArrayLike, width: ArrayLike, p: ArrayLike, passing: bool) -> Floats:
    """Return the chance that a lot passes, or fails, with two limits and sigma known.

    Parameters
    ----------
    n, k, p : array_like
    width : array_like
        The distance of the limits in standard deviations; nothing passes unless it is more than 2 k.
    passing : bool

    Examples
    --------
    >>> round(float(known_between(20, 1.8, 6.0, 0.02, True)), 6)
    0.87254
    """
    n, k, width = (np.asarray(value, dtype=float) for value in (n, k, width))
    off, room, root = mean_off(width, p), np.maximum(width / 2 - k, 0.0), np.sqrt(n)
    if passing:
        return normal_at_least(root * (off - room)) - normal_at_least(root * (off + room))
    return normal_at_most(root * (off - room)) + normal_at_least(root * (off + room))


def mean_off(width: ArrayLike, p: ArrayLike) -> Floats:
    """Return how many standard deviations the mean is off the middle when the fraction `p` is outside.

    Newton's method from the mean at which one limit alone has that fraction: the fraction as a function of
    the mean is convex as far as the limit, so the steps never overshoot there.
    """
    half, p = np.broadcast_arrays(np.asarray(width, dtype=float) / 2, np.asarray(p, dtype=float))
    off = np.maximum(half + normal_quantile(p), 0.0)
    for _ in range(_MEAN_ROUNDS):
        outside = normal_at_most(off - half) + normal_at_most(-off - half)
        slope = _density(off - half) - _density(off + half)
        step = np.where(slope > 0, (outside - p) / np.where(slope > 0, slope, 1.0), 0.0)
        new = np.maximum(off - step, 0.0)
        if np.array_equal(new, off):
            break
        off = new
    return off


def _density(z: Floats) -> Floats:
    return np.asarray(np.exp(-z * z / 2) / np.sqrt(2 * np.pi))
