"""What one cell, or one array formula, holds: small frozen descriptions that `Sheet` lays out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from steelyard.workbooks.checks import Check

Value = float | int | str | None


class Fault(str):
    """An error value of a cell, such as ``#N/A``."""

    __slots__ = ()


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
