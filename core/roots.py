"""Roots of many functions at once, each between two ends where it changes its sign."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from steelyard.core.parameter import Floats

_ROUNDS = 200
_EPSILON = 2.0**-52

Function = Callable[[Floats], Floats]


def root(function: Function, low: Floats, high: Floats) -> Floats:
    """Return where a function is 0, to the last digits.

    Parameters
    ----------
    function : callable
        From an array to finite values of its shape, continuous.
    low, high : ndarray of float
        Ends at which the function has different signs, or is 0.

    Notes
    -----
    T. R. Chandrupatla, Advances in Engineering Software 28 (1997), 145-149 (from memory): inverse quadratic
    interpolation where that is safe, halving otherwise.

    Examples
    --------
    >>> round(float(root(lambda x: x * x - 2, np.array(0.0), np.array(2.0))), 12)
    1.414213562373
    """
    a, b = (np.array(end, dtype=float) for end in np.broadcast_arrays(low, high))
    fa, fb = function(a), function(b)
    c, fc, share = a, fa, np.full(a.shape, 0.5)
    for _ in range(_ROUNDS):
        x = a + share * (b - a)
        fx = function(x)
        same = np.sign(fx) == np.sign(fa)
        c, fc = np.where(same, a, b), np.where(same, fa, fb)
        b, fb = np.where(same, b, a), np.where(same, fb, fa)
        a, fa = x, fx
        best = np.where(np.abs(fa) < np.abs(fb), a, b)
        closest = 2 * _EPSILON * np.abs(best) / np.maximum(np.abs(b - a), 1e-300)
        if ((closest > 0.5) | (fa == 0) | (fb == 0)).all():
            break
        share = np.clip(_share(a, b, c, fa, fb, fc), np.minimum(closest, 0.5), np.maximum(1 - closest, 0.5))
    return np.where(np.abs(fa) < np.abs(fb), a, b)


def _share(a: Floats, b: Floats, c: Floats, fa: Floats, fb: Floats, fc: Floats) -> Floats:
    """Return where to look next, as a share of the way from `a` to `b`."""
    with np.errstate(divide="ignore", invalid="ignore"):
        along, up = (a - b) / (c - b), (fa - fb) / (fc - fb)
        safe = (up**2 < along) & ((1 - up) ** 2 < 1 - along)
        step = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
    return np.where(safe & np.isfinite(step), step, 0.5)


def bracket(function: Function, middle: Floats, step: Floats) -> tuple[Floats, Floats]:
    """Return ends on both sides of `middle` between which a rising function passes 0.

    Examples
    --------
    >>> low, high = bracket(lambda x: x - 100, np.array(0.0), np.array(1.0))
    >>> float(low) < 100 <= float(high)
    True
    """
    found = []
    for sign, reached in ((-1.0, _at_most_zero), (1.0, _at_least_zero)):
        end = np.array(middle + sign * step, dtype=float)
        far = np.array(np.broadcast_to(step, end.shape), dtype=float)
        while not (done := reached(function(end))).all():
            far = np.where(done, far, 2 * far)
            end = np.where(done, end, middle + sign * far)
        found.append(end)
    return found[0], found[1]


def _at_most_zero(values: Floats) -> NDArray[np.bool_]:
    return values <= 0


def _at_least_zero(values: Floats) -> NDArray[np.bool_]:
    return values >= 0
