"""What input cells take: drop-downs and limits, each with a message that can be seen."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from openpyxl.utils import get_column_letter
from openpyxl.worksheet.datavalidation import DataValidation

from steelyard.core.errors import InvalidValue


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


def joined(cells: Iterable[tuple[int, int]]) -> list[str]:
    """Return ranges that cover cells (column, row), those below each other joined."""
    runs: list[list[int]] = []
    for column, row in sorted(cells):
        if runs and runs[-1][0] == column and runs[-1][2] == row - 1:
            runs[-1][2] = row
        else:
            runs.append([column, row, row])
    return [f"{get_column_letter(column)}{top}:{get_column_letter(column)}{end}" for column, top, end in runs]


def validation(check: Check, areas: Sequence[str]) -> DataValidation:
    """Return openpyxl's form of a check over some areas."""
    return DataValidation(
        sqref=" ".join(areas),
        type=check.kind,
        operator=None if check.kind == "list" else "between",
        formula1=check.first,
        formula2=check.second or None,
        allow_blank=check.blank,
        showErrorMessage=True,
        errorTitle="Not possible here",
        error=check.message,
        showInputMessage=bool(check.prompt),
        promptTitle=check.title or None,
        prompt=check.prompt or None,
    )
