"""What was observed, as people type it in a cell."""

from __future__ import annotations

import math
from typing import Any

from steelyard.core.numbers import read_whole


def read_count(value: Any, most: float) -> float:
    """Return an observed count, a whole number from 0 to `most`.

    Parameters
    ----------
    value : float, int or str
        A number, or its text.
    most : float
        The greatest possible count; may be infinite.

    Raises
    ------
    InvalidValue
        When the value is missing, not whole or out of range.

    Examples
    --------
    >>> read_count("2", 50), read_count(3, math.inf)
    (2.0, 3.0)
    """
    return float(read_whole(value, "observed", 0, int(most) if math.isfinite(most) else None))
