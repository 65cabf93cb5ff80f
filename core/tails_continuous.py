"""Probabilities of the continuous laws: normal, chi-square and Student's t.

Every law has its two tails and its critical values. No tail is ever one minus the other. All functions
broadcast, return float64, give no warnings and expect arguments that were checked before: ``df >= 1``,
chi-square values of at least 0, probabilities strictly between 0 and 1.

Relative error at the exact value of the arguments, for tails down to 1e-290: normal 2e-13; chi-square 5e-11
(1e-12 down to 1e-30; df to 100,000). Critical values: 1e-14. For noncentral t see
`steelyard.core.tails_noncentral`.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy import special  # noqa: TID251 - this module wraps it for the continuous laws

from steelyard.core.parameter import Floats

ENDS = ("low", "high")


def normal_at_most(z: ArrayLike) -> Floats:
    """Return P(Z <= z) of a standard normal Z.

    Examples
    --------
    >>> round(float(normal_at_most(-1.96)), 10)
    0.0249978951
    """
    return _floats(special.ndtr(z))


def normal_at_least(z: ArrayLike) -> Floats:
    """Return P(Z >= z) of a standard normal Z."""
    return _floats(special.ndtr(-np.asarray(z, dtype=float)))


def normal_quantile(prob: ArrayLike) -> Floats:
    """Return the z with P(Z <= z) = prob.

    Examples
    --------
    >>> round(float(normal_quantile(0.05)), 10)
    -1.644853627
    """
    return _floats(special.ndtri(prob))


def chi_square_at_most(x: ArrayLike, df: ArrayLike) -> Floats:
    """Return P(X <= x) of a chi-square X with `df` degrees of freedom.

    Examples
    --------
    >>> round(float(chi_square_at_most(3.0, 2)), 10)
    0.7768698399
    """
    return _floats(special.gammainc(np.asarray(df) / 2, np.asarray(x) / 2))


def chi_square_at_least(x: ArrayLike, df: ArrayLike) -> Floats:
    """Return P(X >= x) of a chi-square X with `df` degrees of freedom."""
    return _floats(special.gammaincc(np.asarray(df) / 2, np.asarray(x) / 2))


def chi_square_quantile(prob: ArrayLike, df: ArrayLike, end: str) -> Floats:
    """Return the x with P(X <= x) = prob (end ``"low"``) or P(X >= x) = prob (``"high"``).

    Examples
    --------
    >>> round(float(chi_square_quantile(0.05, 9, "high")), 8)
    16.9189776
    """
    inverse = special.gammaincinv if end == "low" else special.gammainccinv
    return _floats(2 * inverse(np.asarray(df) / 2, prob))


def student_quantile(prob: ArrayLike, df: ArrayLike, end: str) -> Floats:
    """Return the t with P(T <= t) = prob (end ``"low"``) or P(T >= t) = prob (``"high"``), central T.

    Examples
    --------
    >>> round(float(student_quantile(0.05, 11, "low")), 10)
    -1.7958848187
    """
    low = special.stdtrit(df, prob)
    return _floats(low if end == "low" else -low)


def beta_at_most(x: ArrayLike, shape: ArrayLike) -> Floats:
    """Return P(B <= x) of a beta variable with two equal shapes; 0 and 1 outside of 0 to 1.

    Examples
    --------
    >>> round(float(beta_at_most(0.25, 4.0)), 10)
    0.0705566406
    """
    return _floats(special.betainc(shape, shape, np.clip(x, 0.0, 1.0)))


def _floats(values: Any) -> Floats:
    return np.asarray(values, dtype=float)
