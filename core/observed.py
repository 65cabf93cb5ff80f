"""What was observed, as people type it in a cell."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import read_number, read_whole

MOST_COUNTED = 2_000_000_000
_MEASURED = re.compile(r"([a-z]+)\s*=?\s*([-+]?[\d.]+(?:e[-+]?\d+)?)", re.IGNORECASE)
_EXAMPLES = {"mean": "499.7", "s": "0.31"}


@dataclass(frozen=True, slots=True)
class Sample:
    """The mean of a sample, and its standard deviation, or the known one."""

    mean: float
    s: float


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


def read_measured(value: Any, *names: str) -> tuple[float, ...]:
    """Return what was measured, such as the mean and the standard deviation `s` of a sample.

    Parameters
    ----------
    value : float, int or str
        Text such as ``"mean 499.7 s 0.31"``; where one figure is asked for, a number will do.
    *names : str
        The figures asked for, ``"mean"``, ``"s"`` or both; the other one may stand in the text.

    Raises
    ------
    InvalidValue
        When a figure is missing or no number, or a standard deviation is not above 0.

    Examples
    --------
    >>> read_measured("mean 499.7 s 0.31", "mean", "s"), read_measured(499.7, "mean")
    ((499.7, 0.31), (499.7,))
    """
    form = " ".join(f"{name} {example}" for name, example in _EXAMPLES.items() if name in names)
    if len(names) == 1 and not (isinstance(value, str) and value.strip()[:1].isalpha()):
        found = {names[0]: read_number(value, "observed")}
    else:
        text = str(value).strip()
        found = {name.lower(): read_number(number, name) for name, number in _MEASURED.findall(text)}
        if _MEASURED.sub("", text).strip() or not set(names) <= set(found) <= set(_EXAMPLES):
            raise InvalidValue("observed", f"have the form {form}", value)
    if found.get("s", 1.0) <= 0:
        raise InvalidValue("s", "be greater than 0", found["s"])
    return tuple(found[name] for name in names)
