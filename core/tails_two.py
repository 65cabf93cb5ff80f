"""Probabilities of two samples of a measurement: F, and the t of two means whose variances differ.

With B the share of the first sample in the two sums of squares, each in units of its own variance, B is
beta distributed and independent of their total, which is chi-square. Given B, a statistic ``difference over
estimated error`` is a noncentral t; its tail is averaged over B by the trapezoidal rule in log(B/(1 - B)),
which converges exponentially (Moser, Stevens and Watts, Commun. Statist. A 18 (1989), 3963-3975, from
memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike
from scipy import special  # noqa: TID251 - this module wraps it for F and for shares

from steelyard.core.parameter import Floats

_DROP, _STEP, _STEPS_PER_SD = 42.0, 0.25, 0.4


def f_at_most(x: ArrayLike, over: ArrayLike, under: ArrayLike) -> Floats:
    """Return P(F <= x) of a ratio of variances with `over` and `under` degrees of freedom.

    Examples
    --------
    >>> round(float(f_at_most(3.347, 10, 8)), 4)
    0.95
    """
    x, over, under = np.asarray(x, dtype=float), np.asarray(over), np.asarray(under)
    return np.asarray(special.fdtr(over, under, x), dtype=float)


def f_at_least(x: ArrayLike, over: ArrayLike, under: ArrayLike) -> Floats:
    """Return P(F >= x)."""
    x, over, under = np.asarray(x, dtype=float), np.asarray(over), np.asarray(under)
    with np.errstate(divide="ignore"):
        return np.asarray(special.fdtr(under, over, 1 / x), dtype=float)


def f_quantile(prob: ArrayLike, over: ArrayLike, under: ArrayLike, end: str) -> Floats:
    """Return the x with P(F <= x) = prob (end ``"low"``) or P(F >= x) = prob (``"high"``).

    Examples
    --------
    >>> round(float(f_quantile(0.05, 10, 8, "high")), 4)
    3.3472
    """
    if end == "low":
        return np.asarray(special.fdtri(over, under, prob), dtype=float)
    return np.asarray(1 / special.fdtri(under, over, prob), dtype=float)


def mean_over_share(first: int, second: int, chance: Callable[[Floats], Floats]) -> float:
    """Return the mean of a smooth chance over the share B of the first of two chi-squares in their sum.

    Parameters
    ----------
    first, second : int
        Degrees of freedom.
    chance : callable
        From shares of shape (nodes,) to chances.

    Examples
    --------
    >>> round(mean_over_share(3, 5, lambda share: share), 12)
    0.375
    """
    a, b = first / 2, second / 2
    peak = math.log(a / b)
    step = min(_STEP, _STEPS_PER_SD * math.sqrt(1 / a + 1 / b))
    left, right = (_DROP / n + 2 * math.sqrt(_DROP * (1 / a + 1 / b)) for n in (a, b))
    u = peak + np.arange(-math.ceil(left / step), math.ceil(right / step) + 1) * step
    log_weight = a * -np.logaddexp(0, -u) + b * -np.logaddexp(0, u)
    log_weight = log_weight - log_weight.max()
    kept = log_weight > -_DROP
    weight = np.exp(log_weight[kept])
    return float((weight * chance(special.expit(u[kept]))).sum() / weight.sum())
