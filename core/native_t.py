"""Tails of noncentral t as a formula of a spreadsheet's own functions, which have no such law.

The integral of `steelyard.core.tails_noncentral`, over the logarithm of y, as a sum at equal steps: for so
smooth an integrand, which vanishes at both ends, that converges as fast as any rule. The rows' numbers,
``ROW($1:$99)``, count the steps; what stands in those rows does not matter.
"""

from __future__ import annotations

import math

from steelyard.core.numbers import write_number
from steelyard.core.tails_noncentral import density_factor

MOST_ROWS = 5000
_DROP = 32.0  # e^-32 of the density's peak is left out at both ends
_STEP, _LONGEST = 0.7, 0.15  # in standard deviations of the narrowest part; in units of the logarithm


def t_power(low: float | None, high: float | None, df: int, delta: str) -> str | None:
    """Return a formula for P(T <= low) + P(T >= high), to about 1e-12.

    Parameters
    ----------
    low, high : float, optional
        A missing end is an empty tail.
    df : int
        Degrees of freedom.
    delta : str
        The noncentrality as a formula.

    Returns
    -------
    str or None
        None where the sum would be too long.

    Examples
    --------
    >>> t_power(-1.8, None, 11, "B2")[:61]
    'SUMPRODUCT(_xlfn.NORM.S.DIST(-1.8*EXP((ROW($1:$65)-52)/11)-(B'
    """
    ends = [abs(end) for end in (low, high) if end is not None]
    share = _DROP / df
    right = math.sqrt(share)
    for _ in range(8):  # towards the root of (e^2u - 1)/2 - u = share, from above
        right = math.log1p(2 * (share + right)) / 2
    left = share + math.sqrt(share)
    narrow = 1 / math.sqrt(2 * df + (max(ends) * math.exp(right)) ** 2)
    steps = math.ceil(1 / min(_STEP * narrow, _LONGEST))  # to one unit of the logarithm
    zero = math.ceil(left * steps) + 1
    rows = zero + math.ceil(right * steps)
    if rows > MOST_ROWS:
        return None
    u = f"(ROW($1:${rows})-{zero})/{steps}"
    return (
        f"SUMPRODUCT({_phi(low, high, u, delta)}*EXP({df}*({u}+0.5-EXP(2*{u})/2)))"
        f"*{write_number(float(density_factor(df)) / steps)}"
    )


def _phi(low: float | None, high: float | None, u: str, delta: str) -> str:
    """Return the chance of rejection given y, whose logarithm is `u`."""
    if low is not None and low == -(high or 0):  # both in one: a row of two signs against a column of steps
        return f"_xlfn.NORM.S.DIST({write_number(low)}*EXP({u})+{{1,-1}}*({delta}),TRUE)"
    lower = low is not None and f"_xlfn.NORM.S.DIST({write_number(low)}*EXP({u})-({delta}),TRUE)"
    upper = high is not None and f"_xlfn.NORM.S.DIST({delta}-{write_number(high)}*EXP({u}),TRUE)"
    return f"({lower}+{upper})" if lower and upper else str(lower or upper)
