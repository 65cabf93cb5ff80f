"""The functions that xlwings serves to Excel: a thin wrapper for every entry of the catalogue.

The wrappers stand in this module's namespace under the entries' names, where xlwings looks for them. On
systems without Excel xlwings' decorators do nothing and the module still imports.
"""

from __future__ import annotations

import inspect
from collections.abc import Callable
from typing import Any

import xlwings as xw

from steelyard.addin import CATALOGUE
from steelyard.addin.catalogue import Cells, Entry
from steelyard.addin.excel.vba import USER_DEFINED, vba_name

# An error value arrives as 0x800A0000 plus its number, signed. xlwings knows the seven old ones by name.
ERRORS = range(-2146828288 + 2000, -2146828288 + 3000)
NEWER_ERRORS = {ERRORS[43]: "#GETTING_DATA", ERRORS[45]: "#SPILL!", ERRORS[50]: "#CALC!"}


def from_excel(cells: Any) -> Cells:
    """Return an argument as the catalogue takes it: a value, or rows of them; None if left out."""
    if cells is None:
        return None
    rows = [[_error_text(value) for value in row] for row in cells]
    return rows[0][0] if len(rows) == len(rows[0]) == 1 else rows


def to_excel(answer: Cells) -> Cells:
    """Return an answer as COM takes it; a cell holds only floating-point numbers, so none is lost."""
    if isinstance(answer, list):
        return [[to_excel(value) for value in row] for row in answer]
    return float(answer) if isinstance(answer, int) else answer


def _error_text(value: Any) -> Any:
    if type(value) is int and value in ERRORS:
        return NEWER_ERRORS.get(value, "#VALUE!")
    return value


def _signature(entry: Entry) -> inspect.Signature:
    return inspect.Signature(
        [
            inspect.Parameter(
                vba_name(argument.name),
                inspect.Parameter.POSITIONAL_OR_KEYWORD,
                default=inspect.Parameter.empty if argument.required else None,
            )
            for argument in entry.arguments
        ]
    )


def wrapper(entry: Entry) -> Callable[..., Cells]:
    """Return the function that xlwings calls for an entry, with the entry's name and texts."""

    def answer(*arguments: Any) -> Any:
        return to_excel(entry.function(*map(from_excel, arguments)))

    answer.__name__ = answer.__qualname__ = entry.name
    answer.__doc__ = entry.help
    answer.__annotations__ = {}  # xlwings would take a type hint for a converter
    answer.__signature__ = _signature(entry)  # type: ignore[attr-defined]
    for argument in entry.arguments:
        # Rows whatever the shape, so that a column stays a column; error values as text, not as blanks.
        xw.arg(vba_name(argument.name), doc=argument.help, ndim=2, err_to_str=True)(answer)
    return xw.func(category=USER_DEFINED)(answer)  # last: every other decorator resets the category


globals().update({entry.name: wrapper(entry) for entry in CATALOGUE.values()})
