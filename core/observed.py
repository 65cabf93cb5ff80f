"""What was observed, as people type it in a cell."""

from __future__ import annotations

from typing import Any

from steelyard.core.numbers import read_whole

MOST_COUNTED = 2_000_000_000


def read_count(value: Any, most: float) -> float:
    """Return an observed count, a whole number from 0 to `most`.

    Parameters
    ----------
    value : float, int or str
        A number, or its text.
    most : float
        The greatest possible count; where it is infinite, two thousand million are allowed.

    Raises
    ------
    InvalidValue
        When the value is missing, not whole or out of range.

    Examples
    --------
    >>> read_count("2", 50), read_count(3, float("inf"))
    (2.0, 3.0)
    """
    return float(read_whole(value, "observed", 0, int(min(most, MOST_COUNTED))))
