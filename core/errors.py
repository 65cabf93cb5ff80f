"""The package's errors: one base class, messages of one form."""

from __future__ import annotations

from typing import Any


class SteelyardError(ValueError):
    """Base of every error that Steelyard raises on purpose."""


class InvalidValue(SteelyardError):
    """A named value is not allowed.

    Parameters
    ----------
    name : str
        What the user calls the value, e.g. ``"alpha"``.
    rule : str
        What it must do, starting with a verb, e.g. ``"lie between 0 and 1"``.
    value : object
        What was given.
    hint : str, optional
        What to type instead.

    Examples
    --------
    >>> print(InvalidValue("alpha", "lie between 0 and 1", 5, "type 5% or 0.05"))
    alpha must lie between 0 and 1, but got 5 (type 5% or 0.05)
    """

    def __init__(self, name: str, rule: str, value: Any, hint: str = "") -> None:
        self.name, self.rule, self.value, self.hint = name, rule, value, hint
        super().__init__(name, rule, value, hint)

    def __str__(self) -> str:
        tail = f" ({self.hint})" if self.hint else ""
        return f"{self.name} must {self.rule}, but got {shown(self.value)}{tail}"


class NoAnswer(SteelyardError):
    """The question is well put, but has no answer for this plan."""


def shown(value: Any, width: int = 40) -> str:
    """Return a value as a message shows it: short, numbers without a trailing ``.0``."""
    if value is None or value == "":
        return "nothing"
    if isinstance(value, float):
        text = repr(float(value)).removesuffix(".0")
    else:
        text = str(value)
    return text if len(text) <= width else text[: width - 1] + "…"
