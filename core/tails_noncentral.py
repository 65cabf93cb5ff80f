"""Probabilities of noncentral t, both tails, also where they are very small.

T = (Z + delta) / Y with a standard normal Z and ``df Y**2`` chi-square with `df` degrees of freedom, so

    P(T <= t) = integral of Phi(t y - delta) f(y) dy,    f the density of Y.

The integrand is positive, so nothing cancels: the sum keeps its relative accuracy however small the tail.
The upper tail is the lower one with both signs turned. ``y`` times the integrand has one peak and a concave
logarithm; Newton's method finds the peak, and from outside the two places where it has dropped by e^-42.
Phi rises from 0 to 1 around ``y = delta / t``; the range is cut where that begins and ends, and each of the
three parts is integrated by Gauss and Legendre's rule.

Relative error against 60 digits, for df 1 to 1,000,000, |delta| and |t| to 3,000 and tails from 1e-290: at
most 2e-12, in the body 1e-14.

References
----------
D. B. Owen, "A special case of a bivariate non-central t-distribution", Biometrika 52 (1965), 437-446 (from
memory: the integral over the standard deviation).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike
from scipy import special  # noqa: TID251 - this module wraps it for noncentral t

from steelyard.core.parameter import Floats
from steelyard.core.roots import bracket, root

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(48)
_DROP = 42.0  # e^-42 of the peak is less than the rounding error of the sum
_STEP = 9.0  # Phi(-9) is 1e-19
_PEAK_ROUNDS, _END_ROUNDS = 6, 11
_FARTHEST = 1e15
_FAR = 1e60  # beyond, the tail is 0 or 1 and squares overflow
_FLAT = 1e-30  # a slope of Phi that leaves it constant over all y of weight
_NEAR = 0.05  # of the way from the peak to an end; the ends need not be exact
_CHUNK = 256  # points at a time, so that their nodes stay in the cache
_TINY = 1e-300
_ROOT_TWO = math.sqrt(2.0)


def student_at_most(t: ArrayLike, df: ArrayLike, delta: ArrayLike = 0.0) -> Floats:
    """Return P(T <= t) of noncentral t.

    Parameters
    ----------
    t : array_like
        From -1e15 to 1e15, or infinite.
    df : array_like
        Degrees of freedom, whole numbers from 1.
    delta : array_like
        The noncentrality: the mean of Z + delta.

    Examples
    --------
    >>> round(float(student_at_most(2.34, 3, 1.0)), 12)
    0.801888999614
    """
    t, df, delta = np.broadcast_arrays(*(np.asarray(value, dtype=float) for value in (t, df, delta)))
    flat = [value.ravel() for value in (np.clip(t, -_FARTHEST, _FARTHEST), df, delta)]
    found = np.empty(t.size)
    with np.errstate(all="ignore"):  # in branches that are not taken
        for start in range(0, t.size, _CHUNK):
            part = slice(start, start + _CHUNK)
            found[part] = _lower(*(value[part] for value in flat))
    return np.where(np.isinf(t), t > 0, found.reshape(t.shape))


def student_at_least(t: ArrayLike, df: ArrayLike, delta: ArrayLike = 0.0) -> Floats:
    """Return P(T >= t) of noncentral t; the parameters are those of `student_at_most`.

    Examples
    --------
    >>> float(f"{student_at_least(-3.0, 20, 5.0):.10g}"), float(f"{student_at_most(-3.0, 20, 5.0):.10g}")
    (1.0, 1.316391558e-13)
    """
    return student_at_most(-np.asarray(t, dtype=float), df, -np.asarray(delta, dtype=float))


def student_quantile(prob: ArrayLike, df: ArrayLike, delta: ArrayLike, end: str) -> Floats:
    """Return the t with P(T <= t) = prob (end ``"low"``) or P(T >= t) = prob (``"high"``), noncentral T.

    Examples
    --------
    >>> round(float(student_quantile(0.05, 19, 5.731358, "high")) / 20**0.5, 3)
    1.926
    """
    prob, df, delta = np.broadcast_arrays(*(np.asarray(value, dtype=float) for value in (prob, df, delta)))
    if end == "high":
        return -student_quantile(prob, df, -delta, "low")
    sign = np.where(prob <= 0.5, 1.0, -1.0)  # the smaller tail decides
    target = np.minimum(prob, 1 - prob)

    def surplus(t: Floats) -> Floats:
        """Return by how much the tail is off, in logarithms that stay finite; rising in t."""
        tail = student_at_most(sign * t, df, sign * delta)
        return np.asarray(sign * np.log(np.maximum(tail, _TINY) / target))

    width = np.sqrt(1 + delta * delta / (2 * df))
    return root(surplus, *bracket(surplus, delta + special.ndtri(prob) * width, 0.1 * width))


def _lower(t: Floats, df: Floats, delta: Floats) -> Floats:
    delta = np.clip(delta, -_FAR, _FAR)
    start, stop = _range(t, df, delta)
    slope = np.where(np.abs(t) < _FLAT, _FLAT, t)
    begins, ends = np.sort([(delta - _STEP) / slope, (delta + _STEP) / slope], axis=0)
    edges = np.array([start, np.clip(begins, start, stop), np.clip(ends, start, stop), stop])
    half, middle = (edges[1:] - edges[:-1]) / 2, (edges[1:] + edges[:-1]) / 2
    away = (middle - 1.0)[..., None] + half[..., None] * _NODES  # y - 1
    t, df, delta = (value[:, None] for value in (t, df, delta))
    power = np.where(df == 1, 0.0, (df - 1) * np.log1p(away))
    density = np.exp(power - df * away * (1 + away / 2))
    values = special.ndtr(t * away + (t - delta)) * density
    total = ((values * _WEIGHTS).sum(axis=-1) * half).sum(axis=0)
    return np.asarray(np.minimum(total * density_factor(df[:, 0]), 1.0))


def density_factor(df: ArrayLike) -> Floats:
    """Return the density of Y at 1; elsewhere it is this times ``y**(df - 1) exp(-df (y**2 - 1) / 2)``."""
    df = np.asarray(df, dtype=float)
    return np.asarray(np.sqrt(df / np.pi) * np.exp(-_gamma_excess(df / 2)))


def _range(t: Floats, df: Floats, delta: Floats) -> tuple[Floats, Floats]:
    """Return where y times the integrand is not negligible."""
    peak = _peak(t, df, delta)
    level = _log_weight(peak, t, df, delta) - _DROP
    share = _DROP / df
    width = np.sqrt(2 * share)
    left = peak * np.maximum(np.exp(-share - width), 1 - width / peak)  # outside, as the logarithm is concave
    ends = np.array([left, peak + width])
    for _ in range(_END_ROUNDS):
        step = (_log_weight(ends, t, df, delta) - level) / _slope(ends, t, df, delta)
        ends = np.where(step < ends, ends - step, ends)
        if (np.abs(step) < _NEAR * np.abs(ends - peak)).all():
            break
    return ends[0], ends[1]


def _peak(t: Floats, df: Floats, delta: Floats) -> Floats:
    """Return the y at which y times the integrand is greatest."""
    square = t * t + df
    root = np.hypot(t * delta, 2 * np.sqrt(df * square))
    # Where Phi falls as its argument's square, this is the answer; where Phi is nearly 1, it is 1.
    y = np.where(t * delta >= 0, (t * delta + root) / (2 * square), 2 * df / (root - t * delta))
    y = np.where(t < delta, y, 1.0)
    for _ in range(_PEAK_ROUNDS):
        z = t * y - delta
        mills = _mills(z)
        curvature = t * t * mills * (z + mills) + df * (1 + 1 / (y * y))
        new = y + (t * mills + df * (1 / y - y)) / curvature
        last, y = y, np.where(new > 0, new, y / 2)
        if (np.abs(y - last) * np.sqrt(curvature) < _NEAR).all():
            break
    return y


def _log_weight(y: Floats, t: Floats, df: Floats, delta: Floats) -> Floats:
    return np.asarray(special.log_ndtr(t * y - delta) + df * (np.log(y) - (y * y - 1) / 2))


def _slope(y: Floats, t: Floats, df: Floats, delta: Floats) -> Floats:
    return t * _mills(t * y - delta) + df * (1 / y - y)


def _mills(z: Floats) -> Floats:
    """Return the normal density over the lower tail."""
    return np.asarray(math.sqrt(2 / math.pi) / special.erfcx(-z / _ROOT_TWO))


def _gamma_excess(x: Floats) -> Floats:
    """Return what Stirling's formula lacks: ``log(gamma(x)) - (x - 1/2) log(x) + x - log(2 pi)/2``."""
    w = 1 / (x * x)
    series = (1 / 12 - w * (1 / 360 - w * (1 / 1260 - w * (1 / 1680 - w / 1188)))) / x
    small = np.minimum(x, 16.0)
    direct = special.gammaln(small) - (small - 0.5) * np.log(small) + small - 0.5 * math.log(2 * math.pi)
    return np.where(x < 16, direct, series)
