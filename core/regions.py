"""Critical counts: which counts a plan rejects, so that its size keeps alpha.

One rule serves critical regions, p-values, decisions and limits: the region is ``{x: p-value(x) <= alpha}``
(`steelyard.core.splits` says what the p-value is). A tie with alpha rejects; it is decided exactly, on the
decimals as typed.

For many designs at once use `critical_high` and `critical_low`.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from steelyard.core.law import CountLaw
from steelyard.core.parameter import Columns, Floats
from steelyard.core.splits import ONE_SIDED, Truth, first_whole, tails_of, within


def critical_high(law: CountLaw, columns: Columns, rate: Any, alpha: float, split: str = ONE_SIDED) -> Floats:
    """Return the least count that rejects at the high end, for many designs at once.

    Parameters
    ----------
    law : CountLaw
    columns : dict of ndarray
        The designs' fields, e.g. ``{"n": np.array([50.0, 125.0])}``; they broadcast with `rate`.
    rate : float or ndarray
        The claim's boundary.
    alpha : float
        Nominal significance level.
    split : {"one-sided", "half", "nearest", "rarest"}
        How a two-sided test shares alpha; ``"one-sided"`` gives this end all of it.

    Returns
    -------
    ndarray of float
        Whole numbers; NaN where no possible count is rejected.

    Examples
    --------
    >>> from steelyard.core.kinds.binomial import BINOMIAL
    >>> critical_high(BINOMIAL.law, {"n": np.array([1.0, 50.0, 125.0])}, 0.02, 0.05).tolist()
    [1.0, 4.0, 6.0]
    """
    rate = np.asarray(rate, dtype=float)

    def rejects(x: Floats) -> Truth:
        return within(law, columns, rate, tails_of(law, columns, rate, x, "high", split), alpha)

    high = first_whole(rejects, np.zeros(()))
    return np.where(high <= law.most(columns), high, np.nan)


def critical_low(law: CountLaw, columns: Columns, rate: Any, alpha: float, split: str = ONE_SIDED) -> Floats:
    """Return the greatest count that rejects at the low end, for many designs at once.

    Parameters and shape are those of `critical_high`.

    Examples
    --------
    >>> from steelyard.core.kinds.binomial import BINOMIAL
    >>> critical_low(BINOMIAL.law, {"n": np.array([58.0, 59.0])}, 0.05, 0.05).tolist()
    [nan, 0.0]
    """
    rate = np.asarray(rate, dtype=float)

    def accepts(x: Floats) -> Truth:
        return ~within(law, columns, rate, tails_of(law, columns, rate, x, "low", split), alpha)

    low = first_whole(accepts, np.zeros(())) - 1
    return np.where(low >= 0, low, np.nan)
