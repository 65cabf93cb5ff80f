"""Cells to core and back: the catalogue of cell functions, for any spreadsheet program.

Every function is an ordinary Python callable: ``from steelyard.addin import SY_POWER``. It takes what a
spreadsheet hands over and returns a number, a text, or rows of these; refusals are texts.
"""

from __future__ import annotations

from steelyard.addin import (
    ask,
    assurance,
    clustered,
    demonstration,
    explain,
    inspected,
    lots,
    make,
    measured,
    picking,
    staged,
    together,
    two_samples,
    until,
)
from steelyard.addin.catalogue import CATALOGUE, Cells
from steelyard.addin.cells import refusal

__all__ = ["CATALOGUE", "call", *sorted(CATALOGUE)]

globals().update({name: entry.function for name, entry in CATALOGUE.items()})


def call(name: str, arguments: list[Cells]) -> Cells:
    """Call a cell function by its name, ``"SY_POWER"`` or ``"power"``; never raises.

    Examples
    --------
    >>> round(call("power", ["binomial | n 50 | reject x>=4", "10%"]), 4)
    0.7497
    """
    entry = CATALOGUE.get(name) or CATALOGUE.get(f"SY_{name.upper()}")
    if entry is None:
        return refusal(f"there is no function {name}")
    return entry.function(*arguments)


del (
    ask,
    assurance,
    clustered,
    demonstration,
    explain,
    inspected,
    lots,
    make,
    measured,
    picking,
    staged,
    together,
    two_samples,
    until,
)
