"""Numbers as people type them: shortest decimals, percent and ppm, whole numbers.

A float stands for the shortest decimal text that reads back to it; percent is taken by
decimal arithmetic, because ``1.1 / 100`` is 0.011000000000000001.
"""

from __future__ import annotations

import math
import sys
from decimal import Decimal, InvalidOperation
from difflib import get_close_matches
from fractions import Fraction
from functools import lru_cache
from typing import Any

from steelyard.core.errors import InvalidValue

_SCALES = {"%": 2, "ppm": 6}
LEAST = 1e-290  # a smaller probability is not computed to all its digits
MOST = sys.float_info.max  # a whole number beyond it has no float


def write_number(value: float) -> str:
    """Return the shortest text that reads back to the same number.

    Examples
    --------
    >>> write_number(50.0), write_number(0.02), write_number(5e-05)
    ('50', '0.02', '5e-05')
    """
    return repr(float(value)).removesuffix(".0")


def typed(value: float) -> Fraction:
    """Return the exact decimal number that a float's shortest text shows.

    Examples
    --------
    >>> typed(0.1)
    Fraction(1, 10)
    """
    return Fraction(repr(float(value)))


def read_number(value: Any, name: str) -> float:
    """Return a finite number from a cell's number or from text such as ``"2%"`` or ``"50 ppm"``.

    Parameters
    ----------
    value : float, int or str
        Decimal point only; ``%`` and ``ppm`` are scaled in decimal arithmetic.
    name : str
        What the user calls the value.

    Raises
    ------
    InvalidValue
        For anything that is no finite number, logical values included.

    Examples
    --------
    >>> read_number("1.1%", "rate"), read_number("50 ppm", "rate"), read_number(3, "n")
    (0.011, 5e-05, 3.0)
    """
    if isinstance(value, bool) or value is None:
        raise InvalidValue(name, "be a number", value)
    if isinstance(value, int | float):
        number = float(value) if abs(value) <= MOST else math.inf
    else:
        number = _read_text(str(value), name)
    if not math.isfinite(number):
        raise InvalidValue(name, "be a finite number", value)
    return number + 0.0  # no minus zero


@lru_cache(maxsize=4096)
def _read_text(text: str, name: str) -> float:
    digits, scale = text.strip().lower(), 0
    for suffix, places in _SCALES.items():
        if digits.endswith(suffix):
            digits, scale = digits.removesuffix(suffix).rstrip(), places
    try:
        if "_" in digits or not digits.isascii():
            raise InvalidOperation
        return float(Decimal(digits).scaleb(-scale))
    except (ArithmeticError, ValueError):  # 1e9999999 and a signalling NaN are no floats
        hint = "write decimals with a point" if "," in digits else ""
        raise InvalidValue(name, "be a number", text, hint) from None


def read_whole(value: Any, name: str, at_least: int = 0, at_most: int | None = None) -> int:
    """Return a whole number; 50.0 is fine, 50.5 is refused, never rounded.

    Raises
    ------
    InvalidValue
        When `value` is not whole or outside ``at_least .. at_most``.
    """
    number = read_number(value, name)
    if number.is_integer() and number >= at_least and (at_most is None or number <= at_most):
        return int(number)
    reach = f"of at least {at_least}" if at_most is None else f"from {at_least} to {at_most}"
    raise InvalidValue(name, f"be a whole number {reach}", value)


def read_probability(value: Any, name: str) -> float:
    """Return a number strictly between 0 and 1, such as alpha, a power or a confidence.

    Examples
    --------
    >>> read_probability("5%", "alpha")
    0.05
    """
    number = read_number(value, name)
    if LEAST <= number < 1:
        return number
    if 0 < number < LEAST:
        raise InvalidValue(name, f"be at least {LEAST}", value)
    percent = write_number(float(Decimal(repr(number)) / 100))
    hint = f"type {write_number(number)}% or {percent}" if 1 <= number < 100 else ""
    raise InvalidValue(name, "lie between 0 and 1", value, hint)


def read_choice(value: Any, name: str, allowed: tuple[str, ...]) -> str:
    """Return one of the allowed words, whatever its case.

    Raises
    ------
    InvalidValue
        With a suggestion where one word comes close.
    """
    word = str(value).strip().lower()
    if word in allowed:
        return word
    close = get_close_matches(word, allowed, n=1)
    hint = f"did you mean {close[0]}?" if close else ""
    raise InvalidValue(name, f"be one of {', '.join(allowed)}", value, hint)
