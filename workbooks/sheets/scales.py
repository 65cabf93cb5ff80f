"""Round numbers for tables and axes of true values."""

from __future__ import annotations

import math

from steelyard.workbooks.charts import Axis, step

_NICE = (1, 2, 2.5, 5, 10)


def nice(size: float) -> float:
    """Return the next round number: 1, 2, 2.5 or 5 times a power of ten.

    Examples
    --------
    >>> nice(0.0163), nice(0.25), nice(21)
    (0.02, 0.25, 25.0)
    """
    power = 10.0 ** math.floor(math.log10(size))
    factor = next(factor for factor in _NICE if factor * power >= size * (1 - 1e-9))
    return clean(factor * power)


def clean(value: float) -> float:
    """Return a float without the dust of arithmetic.

    Examples
    --------
    >>> clean(3 * 0.1)
    0.3
    """
    return float(f"{value:.12g}")


def rate_axis(title: str, end: float, percent: bool) -> Axis:
    """Return the axis of true values from 0 to `end`; in percent it has as many decimals as its labels need.

    Examples
    --------
    >>> rate_axis("true defect rate, p", 0.04, percent=True).digits
    '0.0%'
    """
    decimals = max(0, -math.floor(math.log10(100 * step(0, end))))
    digits = f"0{'.' if decimals else ''}{'0' * decimals}%"
    return Axis(title, high=end, digits=digits if percent else "General")
