"""Steelyard's functions as Calc sees them: ``SY.POWER`` and its sisters.

This file runs inside LibreOffice's own Python: standard library and UNO only, syntax of Python 3.8.
Names, help and arguments come from ``functions.json``, which is written from the catalogue when the
extension is built; the numbers come from the worker (see ``pipe.py``).

What Calc hands over, and what this file makes of it
-----------------------------------------------------
- A range is an exact picture: empty cells and empty texts arrive as empty, numbers as numbers.
- *A single cell is not*: Calc passes an empty one as the number 0, so an uninspected lot would look like
  "0 found". A bare 0 is therefore refused unless 0 is what a blank means there anyway; written as a range of
  one cell (``E5:E5``), or ``{0}`` for a typed zero, both are told apart.
- So does an optional one: leave it out of the formula, or name it as ``E5:E5``.
- TRUE arrives as 1 and cannot be told from it; a date arrives as its day number.
- An error value in a single cell passes through without a call; one inside a range gives Err:504.
- An argument left out arrives as nothing and takes its default.

Results are rectangles of numbers, texts and empty cells, whether one cell or many; as an array formula
the whole rectangle shows, in a plain cell its first value.
"""

# ruff: noqa: D102 - UNO prescribes the methods of the add-in object

from __future__ import annotations

import json
from pathlib import Path
from typing import Any, Callable, Tuple  # noqa: UP035 - Python 3.8

import uno
import unohelper
from com.sun.star.lang import Locale, XServiceInfo, XServiceName
from com.sun.star.sheet import LocalizedName, XAddIn, XCompatibilityNames
from steelyard_pipe import MAX_CELLS, Worker  # type: ignore[import-not-found]

SERVICE = "SY"
ADDIN = "com.sun.star.sheet.AddIn"
IMPLEMENTATION = "steelyardcalc.Functions"

_FOLDER = Path(__file__).resolve().parent
_INTEGERS = 1 << 31
Rows = Tuple[Tuple[Any, ...], ...]  # noqa: UP006 - Python 3.8


def _load(name: str) -> Any:
    return json.loads((_FOLDER / name).read_text(encoding="utf-8"))


FUNCTIONS = _load("functions.json")
_worker = Worker(**_load("settings.json"))


class AddIn(unohelper.Base, XAddIn, XCompatibilityNames, XServiceName, XServiceInfo):  # type: ignore[misc]
    """What Calc asks about the functions; `create` adds the functions themselves."""

    def __init__(self, context: Any) -> None:
        self._locale = Locale("en", "US", "")

    # XServiceName, XServiceInfo: the service name is the part of SY.POWER before the dot.
    def getServiceName(self) -> str:
        return SERVICE

    def getImplementationName(self) -> str:
        return IMPLEMENTATION

    def supportsService(self, name: str) -> bool:
        return name in self.getSupportedServiceNames()

    def getSupportedServiceNames(self) -> tuple[str, ...]:
        return (ADDIN, SERVICE)

    # XLocalizable: the texts are in English whatever Calc asks for.
    def setLocale(self, locale: Any) -> None:
        self._locale = locale

    def getLocale(self) -> Any:
        return self._locale

    # XAddIn (the spelling "Funtion" is LibreOffice's own).
    def getProgrammaticFuntionName(self, display: str) -> str:
        return display.partition(".")[2]

    def getDisplayFunctionName(self, method: str) -> str:
        return f"{SERVICE}.{method}"

    def getFunctionDescription(self, method: str) -> str:
        return FUNCTIONS[method]["help"] if method in FUNCTIONS else ""

    def getDisplayArgumentName(self, method: str, index: int) -> str:
        return self._argument(method, index, "name")

    def getArgumentDescription(self, method: str, index: int) -> str:
        return self._argument(method, index, "help")

    def getProgrammaticCategoryName(self, method: str) -> str:
        return "Statistical"

    def getDisplayCategoryName(self, method: str) -> str:
        return "Statistical"

    # XCompatibilityNames: how the function is spelt in an Excel file. Calc 7.4 ignores it on loading .xlsx.
    def getCompatibilityNames(self, method: str) -> tuple[Any, ...]:
        return (LocalizedName(Locale("en", "US", ""), f"{SERVICE}_{method}"),)

    @staticmethod
    def _argument(method: str, index: int, field: str) -> str:
        arguments = FUNCTIONS.get(method, {}).get("arguments", [])
        return arguments[index][field] if index < len(arguments) else ""


def answer(method: str, given: tuple[Any, ...]) -> Rows:
    """Answer one cell: a rectangle of values, or a text that says what is wrong."""
    arguments = FUNCTIONS[method]["arguments"]
    for argument, value in zip(arguments, given):  # noqa: B905 - Python 3.8
        refusal = _refusal(argument, value)
        if refusal:
            return ((refusal,),)
    return _outward(_worker.call(method, [_inward(value) for value in given]))


def _refusal(argument: dict[str, Any], value: Any) -> str:
    """Return why a value can't be passed on, or an empty text."""
    name = argument["name"]
    if isinstance(value, tuple):
        cells = len(value) * len(value[0])
        if cells > MAX_CELLS:
            rule = f"must be a range of at most {MAX_CELLS} cells, but got {cells}"
            return f"SY: {name} {rule}: name the rows in use, such as A2:A500"
    elif value == 0 and not argument["zero"]:
        rule = "is 0 or an empty cell, which Calc does not tell apart"
        return f"SY: {name} {rule}: write E5:E5 instead of E5, or {{0}} for a typed zero"
    return ""


def _inward(value: Any) -> Any:
    """Return an argument in plain JSON values, with None where nothing stands."""
    if isinstance(value, tuple):
        return [[None if cell == "" else cell for cell in row] for row in value]
    return None if value == "" else value


def _outward(result: Any) -> Rows:
    """Return a result as the rectangle that Calc takes for single cells and arrays alike."""
    if isinstance(result, list):
        return tuple(tuple(map(_cell, row)) for row in result)
    return ((_cell(result),),)


def _cell(value: Any) -> Any:
    """Return a value that Calc shows rightly: an empty result would read as 0, and so do bools."""
    if value is None:
        return ""
    if isinstance(value, int):  # Calc takes no integer beyond 32 bit
        return int(value) if -_INTEGERS <= value < _INTEGERS else float(value)
    return value


def create(context: Any) -> Any:
    """Return the add-in object: a method per cell function, as the extension's interface declares them."""
    interface = uno.getClass("steelyardcalc.XFunctions")
    return type("Functions", (AddIn, interface), {name: _method(name) for name in FUNCTIONS})(context)


def _method(name: str) -> Callable[..., Rows]:
    def method(self: AddIn, *given: Any) -> Rows:
        return answer(name, given)

    return method


g_ImplementationHelper = unohelper.ImplementationHelper()  # noqa: N816 - the name LibreOffice looks for
g_ImplementationHelper.addImplementation(create, IMPLEMENTATION, (ADDIN, SERVICE))
