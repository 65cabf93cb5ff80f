"""What one cell, or one array formula, holds: small frozen descriptions that `Sheet` lays out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from steelyard.core.errors import InvalidValue

Value = float | int | str | None


@dataclass(frozen=True, slots=True)
class Check:
    """What an input cell takes; anything else gets a visible message.

    Parameters
    ----------
    kind : {"list", "decimal", "whole", "textLength"}
        Type of data validation.
    first, second : str
        Limits, or the list: ``"above,below"`` in quotes or a cell range.
    message : str
        Shown when the input is refused, at most 255 characters.
    title, prompt : str
        Shown beside the selected cell, at most 32 and 255 characters.
    blank : bool
        Whether the cell may stay empty.
    """

    kind: str
    first: str
    second: str = ""
    message: str = ""
    title: str = ""
    prompt: str = ""
    blank: bool = False

    def __post_init__(self) -> None:
        for name, limit in (("first", 255), ("title", 32), ("message", 255), ("prompt", 255)):
            if len(getattr(self, name)) > limit:
                rule = f"have at most {limit} characters"
                raise InvalidValue(name, rule, getattr(self, name))


def choice(options: Sequence[str], title: str = "", prompt: str = "", blank: bool = False) -> Check:
    """Return a drop-down of fixed words.

    Examples
    --------
    >>> choice(["above", "below"]).message
    'Choose one of: above, below.'
    """
    if any("," in option or '"' in option for option in options):
        raise InvalidValue("options", "hold no comma and no quotation mark", options)
    message = f"Choose one of: {', '.join(options)}."
    return Check("list", f'"{",".join(options)}"', "", message, title, prompt, blank)


def between(
    low: float, high: float, title: str = "", prompt: str = "", blank: bool = False, whole: bool = False
) -> Check:
    """Return the check of a number from `low` to `high`, both allowed."""
    number = "a whole number" if whole else "a number"
    message = f"Type {number} from {low:g} to {high:g}."
    return Check("whole" if whole else "decimal", repr(low), repr(high), message, title, prompt, blank)


@dataclass(frozen=True, slots=True)
class Put:
    """A text or a number. A text that starts with ``=`` stays a text.

    Parameters
    ----------
    value : float, int, str or None
        None leaves the cell empty, but styled.
    style : str
        Words of `steelyard.workbooks.styles`.
    span : int
        Columns that the cell covers.
    check : Check, optional
        What may be typed here.
    link : str
        A place in this book that a click leads to, e.g. ``"'Power grid'!A1"``.
    """

    value: Value
    style: str = "plain"
    span: int = 1
    check: Check | None = None
    link: str = ""


@dataclass(frozen=True, slots=True)
class Live:
    """A formula and the value that it has, `shown` by readers that do not calculate."""

    formula: str
    shown: Value
    style: str = "result"
    span: int = 1


@dataclass(frozen=True, slots=True)
class LiveArray:
    """One array formula over the cells of `shown`: rows of values, usually a single row."""

    formula: str
    shown: Sequence[Sequence[Value]]
    style: str = "result"


Piece = Put | Live | LiveArray | None
