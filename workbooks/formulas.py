"""Formula texts, written once as ``SY_POWER(…)`` and spelled for the host; names of cells and tables."""

from __future__ import annotations

import re
from typing import Literal

from openpyxl.utils import FORMULAE

from steelyard.core.errors import InvalidValue, SteelyardError

Host = Literal["excel", "calc"]

_LATER = {
    ("DIST", "INV"): ("BETA", "BINOM", "CHISQ", "F", "GAMMA", "NORM", "NORM.S", "T"),
    ("DIST",): ("EXPON", "HYPGEOM", "NEGBINOM", "POISSON"),
    ("DIST.RT", "INV.RT"): ("CHISQ", "F"),
    ("DIST.2T", "INV.2T", "DIST.RT"): ("T",),
    ("S",): ("STDEV", "VAR"),
    ("EQ",): ("RANK",),
}
#: Functions younger than the file format: a file names them with the prefix ``_xlfn.``.
LATER = frozenset(
    {"CONCAT", "IFNA", "IFS", "SWITCH", "TEXTJOIN"}
    | {f"{law}.{part}" for parts, laws in _LATER.items() for law in laws for part in parts}
)

# Quoted texts and quoted sheet names are matched first, so that no call is found inside them.
_CALL = re.compile(r"""\"[^"]*\"|'[^']*'|(?<![\w.])([A-Z][A-Z0-9_.]*)(?=\()""")


def spell(formula: str, host: Host) -> str:
    """Return a formula as the file of a host must hold it.

    Parameters
    ----------
    formula : str
        Starts with ``=``; English function names in capitals, our own as ``SY_NAME``.
    host : {"excel", "calc"}
        Excel finds ``SY_NAME``, LibreOffice Calc ``SY.NAME``.

    Raises
    ------
    SteelyardError
        For a function that not both hosts know: it would show #NAME? to somebody.

    Examples
    --------
    >>> spell('=IF(SY_POWER(A2,5%)>BINOM.DIST(3,50,B1,TRUE),"SY_SIZE(","")', "calc")
    '=IF(SY.POWER(A2,5%)>_xlfn.BINOM.DIST(3,50,B1,TRUE),"SY_SIZE(","")'
    """

    def respell(match: re.Match[str]) -> str:
        name = match[1]
        if name is None:
            return match[0]
        if name.startswith("SY_"):
            return f"SY.{name[3:]}" if host == "calc" else name
        if name in LATER:
            return f"_xlfn.{name}"
        if name in FORMULAE:
            return name
        message = f"a formula must use functions that both Excel and Calc know, but got {name}"
        raise SteelyardError(message)

    return _CALL.sub(respell, formula)


_NAME = re.compile(r"[A-Za-z_][A-Za-z0-9_.]{0,254}")
_TAKEN = re.compile(r"[A-Z]{1,3}[0-9]+|R([0-9]*|C[0-9]*|[0-9]+C[0-9]*)|C[0-9]*|TRUE|FALSE", re.IGNORECASE)


def check_name(name: str) -> None:
    """Refuse a name of a cell or table that a spreadsheet program would read as something else.

    Raises
    ------
    InvalidValue
        With the reason.

    Examples
    --------
    >>> check_name("AQL10")
    Traceback (most recent call last):
        ...
    steelyard.core.errors.InvalidValue: name must not look like a cell reference, but got AQL10
    """
    if not _NAME.fullmatch(name):
        raise InvalidValue("name", "start with a letter and hold only letters, digits, _ and .", name)
    if _TAKEN.fullmatch(name):
        raise InvalidValue("name", "not look like a cell reference", name)
