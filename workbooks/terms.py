"""Formulas and their values, made together: the value comes from the very function that the formula names.

A `Terms` is a piece of a formula in every row of a table. `ask` joins such pieces to a call of one of our
functions and calls it once for the whole column, so a book of thousands of rows costs a few calls.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

from steelyard.addin import CATALOGUE, call
from steelyard.workbooks.pieces import Live, LiveArray, Value

_ONE_CELL = re.compile(r"(?:(?:'[^']+'|\w+)!)?(\$?[A-Z]{1,3}\$?\d+)")


@dataclass(frozen=True, slots=True)
class Terms:
    """A piece of a formula in each row, and the cells it stands for.

    Parameters
    ----------
    texts : tuple of str
        One for each row, or one that all rows share.
    cells : object
        The values as a function takes them: a row of cells for each text, or a single value.
    """

    texts: tuple[str, ...]
    cells: Any

    def text(self, row: int) -> str:
        """Return the piece in a row, counted from 0."""
        return self.texts[row if len(self.texts) > 1 else 0]

    def values(self) -> list[Any]:
        """Return the first value of each row."""
        return [row[0] for row in self.cells]

    def lives(self, styles: str | Sequence[str] = "result") -> list[Live]:
        """Return a formula for each row; `styles` are one for all or one for each."""
        each = [styles] * len(self.texts) if isinstance(styles, str) else styles
        return [
            Live(f"={text}", row[0], style)
            for text, row, style in zip(self.texts, self.cells, each, strict=True)
        ]

    def arrays(self, styles: str | Sequence[str] = "result") -> list[LiveArray]:
        """Return an array formula for each row."""
        each = [styles] * len(self.texts) if isinstance(styles, str) else styles
        return [
            LiveArray(f"={text}", [row], style)
            for text, row, style in zip(self.texts, self.cells, each, strict=True)
        ]


def column(letters: str, first: int, values: Iterable[Value], sheet: str = "") -> Terms:
    """Return the cells of a column, one for each row from `first` on.

    Examples
    --------
    >>> column("B", 5, [0.02, 0.05]).texts
    ('B5', 'B6')
    """
    cells = [[value] for value in values]
    where = f"{sheet}!" if sheet else ""
    return Terms(tuple(f"{where}{letters}{first + i}" for i in range(len(cells))), cells)


def across(text: str, values: Sequence[Value]) -> Terms:
    """Return a range of one row that all rows share, such as ``D$6:K$6``."""
    return Terms((text,), [list(values)])


def literal(value: Value) -> Terms:
    """Return a constant that all rows share."""
    return Terms((_written(value),), value)


def literals(values: Iterable[Value]) -> Terms:
    """Return a constant of its own for each row."""
    given = list(values)
    return Terms(tuple(map(_written, given)), [[value] for value in given])


def ask(host: str, name: str, *terms: Terms, unless_blank: Terms | None = None) -> Terms:
    """Return a call of one of our functions in each row, with its values.

    Parameters
    ----------
    host : {"excel", "calc"}
        Calc hands an empty cell and a cell with 0 over alike, but not so ranges of one cell.
    name : str
        ``"POWER"`` for SY_POWER.
    *terms : Terms
        The arguments.
    unless_blank : Terms, optional
        Rows where this is blank show nothing.

    Examples
    --------
    >>> plans = column("A", 2, ["binomial | n 50 | reject x>=4", "binomial | n 80 | reject x>=4"])
    >>> power = ask("excel", "POWER", plans, literal(0.1))
    >>> power.texts[1], round(power.values()[1], 4)
    ('SY_POWER(A3,0.1)', 0.9647)
    """
    rows = max(len(term.texts) for term in terms)
    texts = [
        f"SY_{name}({','.join(_argument(host, term.text(row), place) for place, term in enumerate(terms))})"
        for row in range(rows)
    ]
    cells = _as_rows(call(CATALOGUE[f"SY_{name}"].name, [term.cells for term in terms]), rows)
    if unless_blank is not None:
        blank = [value in (None, "") for value in unless_blank.values()]
        texts = [f'IF({unless_blank.text(i)}="","",{text})' for i, text in enumerate(texts)]
        cells = [[None] * len(row) if empty else row for row, empty in zip(cells, blank, strict=True)]
    return Terms(tuple(texts), cells)


def _as_rows(answer: Any, rows: int) -> list[list[Value]]:
    if isinstance(answer, list):
        return answer
    return [[answer] for _ in range(rows)]  # one cell, or a refusal of the whole


def _argument(host: str, text: str, place: int) -> str:
    match = _ONE_CELL.fullmatch(text) if host == "calc" and place else None
    return f"{text}:{match[1]}" if match else text


def _written(value: Value) -> str:
    if isinstance(value, str):
        doubled = value.replace('"', '""')
        return f'"{doubled}"'
    return "" if value is None else repr(value).removesuffix(".0").upper()
