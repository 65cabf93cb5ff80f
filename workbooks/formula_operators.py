"""Operators of formulas, on single values, as Excel and Calc agree on them."""

from __future__ import annotations

import math
import operator
from collections.abc import Callable
from typing import Any, NoReturn

from steelyard.workbooks.formula_calls import Unfollowed
from steelyard.workbooks.pieces import Fault, Value

_NEARLY = 2.0**-48  # spreadsheets take numbers that differ by less, relatively, for equal


class Raised(Exception):
    """An error value on its way out of a formula."""

    def __init__(self, fault: str) -> None:
        super().__init__(fault)
        self.fault = Fault(fault)


def give_up(reason: str) -> NoReturn:
    """Raise `Unfollowed`."""
    raise Unfollowed(reason)


def number(value: Any) -> float:
    """Return a value as a number: nothing is 0, TRUE is 1."""
    if isinstance(value, str):
        give_up(f"takes the text {value[:20]!r} as a number")
    return float(value or 0.0)


def text(value: Any) -> str:
    """Return a value as text: nothing is empty."""
    if isinstance(value, bool):
        give_up("takes a logical value as text")
    if value is None:
        return ""
    return value if isinstance(value, str) else general(value)


def truth(value: Any) -> bool:
    """Return a value as a condition."""
    if isinstance(value, str):
        give_up(f"takes the text {value[:20]!r} as a condition")
    return bool(value)


def general(value: float) -> str:
    """Return a number as text, with 15 digits as both programs keep them.

    Examples
    --------
    >>> general(0.1 + 0.2), general(5.0), general(5e-05)
    ('0.3', '5', '5E-05')
    """
    return f"{value + 0.0:.15g}".upper()  # no minus before a zero


def _nearly(a: float, b: float) -> bool:
    return a == b or abs(a - b) < _NEARLY * min(abs(a), abs(b))


def _plus(a: Any, b: Any) -> float:
    left, right = number(a), number(b)
    return 0.0 if _nearly(left, -right) else finite(left + right)


def _minus(a: Any, b: Any) -> float:
    return _plus(a, -number(b))


def _divided(a: Any, b: Any) -> float:
    if not number(b):
        raise Raised("#DIV/0!")
    return finite(number(a) / number(b))


def _power(a: Any, b: Any) -> float:
    base, exponent = number(a), number(b)
    if (base < 0 and exponent % 1) or base == exponent == 0:
        give_up("takes a power that not every program answers alike")
    try:
        return finite(base**exponent)
    except (OverflowError, ZeroDivisionError):
        raise Raised("#NUM!") from None


def finite(value: float) -> float:
    """Return a number, unless it is beyond all floats."""
    if not math.isfinite(value):
        raise Raised("#NUM!")
    return value


def _order(a: Any, b: Any) -> int:
    """Return whether a value comes before (-1), with (0) or after (1) another."""
    a, b = _blank_like(a, b), _blank_like(b, a)
    if isinstance(a, bool) is not isinstance(b, bool):
        give_up("compares a logical value with another kind")
    if isinstance(a, str) and isinstance(b, str):
        return 0 if a.casefold() == b.casefold() else 2
    if isinstance(a, str) or isinstance(b, str):
        return 1 if isinstance(a, str) else -1
    return 0 if _nearly(a, b) else 1 if a > b else -1


def _blank_like(value: Any, other: Any) -> Any:
    if value is not None:
        return value
    return "" if isinstance(other, str) else False if isinstance(other, bool) else 0.0


def _compared(test: Callable[[int, int], bool]) -> Callable[[Any, Any], bool]:
    def compare(a: Any, b: Any) -> bool:
        order = _order(a, b)
        if order == 2 and test not in (operator.eq, operator.ne):
            give_up("asks which of two texts comes first")
        return test(order, 0)

    return compare


OPERATIONS: dict[tuple[str, int], Callable[..., Value]] = {
    ("+", 1): lambda a: a,
    ("-", 1): lambda a: -number(a),
    ("%", 1): lambda a: number(a) / 100,  # as both programs compute it, whatever the digits typed
    ("+", 2): _plus,
    ("-", 2): _minus,
    ("*", 2): lambda a, b: finite(number(a) * number(b)),
    ("/", 2): _divided,
    ("^", 2): _power,
    ("&", 2): lambda a, b: text(a) + text(b),
    ("=", 2): _compared(operator.eq),
    ("<>", 2): _compared(operator.ne),
    ("<", 2): _compared(operator.lt),
    (">", 2): _compared(operator.gt),
    ("<=", 2): _compared(operator.le),
    (">=", 2): _compared(operator.ge),
}
