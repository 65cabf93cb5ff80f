"""The value of a formula: calls of ours, and of the spreadsheet's own functions what stands around them.

Only what Excel and Calc compute alike is followed. A text that serves as a number, a logical value compared
with a number, the order of two texts, functions that are not in `NATIVE`: such a formula is `Unfollowed`, as
a number that one program shows and the other does not would be worse than none.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from decimal import ROUND_DOWN, ROUND_HALF_UP, ROUND_UP, Context, Decimal
from typing import Any, Protocol

from steelyard.addin import CATALOGUE
from steelyard.addin.cells import ERRORS, FAULT, REFUSED
from steelyard.workbooks.formula_operators import (
    OPERATIONS,
    Raised,
    finite,
    general,
    give_up,
    number,
    text,
    truth,
)
from steelyard.workbooks.formula_tree import Area, Call, Literal, Name, Operation, Rows, Tree
from steelyard.workbooks.pieces import Fault, Value

Result = Value | list[list[Value]]

Arguments = tuple[Tree | None, ...]

_DIGITS = Context(prec=800)  # enough to round any float at any place


class Cells(Protocol):
    """What a formula refers to."""

    def area(self, area: Area) -> Result:
        """Return the value of a cell, or the rows of a range."""

    def named(self, name: Name) -> Tree:
        """Return what a defined name stands for."""

    def call(self, name: str, arguments: tuple[Result, ...]) -> Result:
        """Return the answer of one of our functions."""


def evaluate(tree: Tree | None, cells: Cells) -> Result:
    """Return the value of a tree.

    Parameters
    ----------
    tree : Tree or None
        From `read_formula`; None is an argument that was left out.
    cells : Cells
        Looks up what the tree refers to.

    Returns
    -------
    float, int, str, bool or None, or a list of rows of these
        None is an empty cell.

    Raises
    ------
    Unfollowed
        With what stands in the way.
    Raised
        When the value is an error value.
    """
    match tree:
        case Literal(value):
            return _checked(value)
        case Rows(rows):
            return [list(row) for row in rows]
        case Area():
            return _checked(cells.area(tree))
        case Name():
            return evaluate(cells.named(tree), cells)
        case Call(ours=True):
            return _ours(tree, cells)
        case Call(name, _, arguments):
            return _native(name, arguments, cells)
        case Operation(sign, operands):
            return OPERATIONS[sign, len(operands)](*(one(operand, cells) for operand in operands))
    give_up("leaves out an argument")


def one(tree: Tree | None, cells: Cells) -> Any:
    """Return the value of a tree where a single one belongs."""
    value = evaluate(tree, cells)
    if isinstance(value, list):
        if len(value) != 1 or len(value[0]) != 1:
            give_up("takes a range where a single value belongs")
        return _checked(value[0][0])
    return value


def _checked(value: Result) -> Result:
    """Return a value, unless it is an error value, which is raised."""
    if isinstance(value, Fault):
        raise Raised(value)
    return value


def _ours(call: Call, cells: Cells) -> Result:
    if call.name not in CATALOGUE:
        give_up(f"uses {call.name}, a function that there is not")
    given = (None if argument is None else evaluate(argument, cells) for argument in call.arguments)
    answer = cells.call(call.name, tuple(given))
    texts = [shown for row in _rows(answer) for shown in row if isinstance(shown, str)]
    if any(shown.startswith(REFUSED + FAULT) for shown in texts):
        give_up(f"meets a fault of {call.name}")
    if isinstance(answer, str) and answer in ERRORS:
        raise Raised(answer)
    if not ERRORS.isdisjoint(texts):
        give_up("takes cells that hold error values")
    return answer


def _rows(value: Result) -> list[list[Value]]:
    return value if isinstance(value, list) else [[value]]


def _native(name: str, arguments: Arguments, cells: Cells) -> Result:
    if name not in NATIVE:
        give_up(f"uses {name}")
    function, least, most = NATIVE[name]
    if not least <= len(arguments) <= most:
        give_up(f"calls {name} with {len(arguments)} arguments")
    return function(arguments, cells)


# The spreadsheet's own functions


Native = Callable[[Arguments, Cells], Result]


def _of_values(function: Callable[..., Value]) -> Native:
    """Return a native function of single values."""

    def call(arguments: Arguments, cells: Cells) -> Result:
        return function(*(one(argument, cells) for argument in arguments))

    return call


def _if(arguments: Arguments, cells: Cells) -> Result:
    condition, then, otherwise = (*arguments, Literal(False))[:3]
    return evaluate(then if truth(one(condition, cells)) else otherwise, cells)


def _if_error(arguments: Arguments, cells: Cells) -> Result:
    try:
        value: Result = one(arguments[0], cells)
        return value
    except Raised:
        return evaluate(arguments[1], cells)


def _is(test: Callable[[Any], bool]) -> Native:
    def call(arguments: Arguments, cells: Cells) -> Result:
        try:
            return test(one(arguments[0], cells))
        except Raised as error:
            return test(error.fault)

    return call


def _is_number(value: Any) -> bool:
    if isinstance(value, bool):
        give_up("asks whether a logical value is a number")
    return isinstance(value, float | int)


def _index(arguments: Arguments, cells: Cells) -> Result:
    rows = _rows(evaluate(arguments[0], cells))
    places = [int(number(one(argument, cells))) for argument in arguments[1:]]
    if len(places) == 1:
        places = [1, *places] if len(rows) == 1 else [*places, 1]
    if len(places) != 2 or min(places) < 1:
        give_up("takes a whole row or column by INDEX")
    if places[0] > len(rows) or places[1] > len(rows[0]):
        raise Raised("#REF!")
    return _checked(rows[places[0] - 1][places[1] - 1])


def _over_numbers(function: Callable[[list[float]], float]) -> Native:
    """Return a native function of the numbers among its arguments; in cells it passes over all else."""

    def call(arguments: Arguments, cells: Cells) -> Result:
        return function([number for argument in arguments for number in _numbers(argument, cells)])

    return call


def _numbers(tree: Tree | None, cells: Cells) -> Iterator[float]:
    value = evaluate(tree, cells)
    if not isinstance(value, list) and not isinstance(tree, Area | Name):
        if isinstance(value, str):
            raise Raised("#VALUE!")
        yield number(value)
        return
    for row in _rows(value):
        for cell in map(_checked, row):
            if isinstance(cell, float | int) and not isinstance(cell, bool):
                yield float(cell)


def _rounded(rounding: str) -> Callable[[Any, Any], float]:
    def to_digits(value: Any, digits: Any) -> float:
        step = Decimal(1).scaleb(-int(number(digits)))
        return finite(float(Decimal(general(number(value))).quantize(step, rounding, _DIGITS)))

    return to_digits


def _left(whole: Any, count: Any = 1.0) -> str:
    return text(whole)[: _place(count, 0)]


def _right(whole: Any, count: Any = 1.0) -> str:
    characters = text(whole)
    return characters[max(0, len(characters) - _place(count, 0)) :]


def _mid(whole: Any, start: Any, count: Any) -> str:
    first = _place(start, 1) - 1
    return text(whole)[first : first + _place(count, 0)]


def _find(part: Any, whole: Any, start: Any = 1.0) -> float:
    found = text(whole).find(text(part), _place(start, 1) - 1)
    if found < 0:
        raise Raised("#VALUE!")
    return found + 1.0


def _place(value: Any, least: int) -> int:
    """Return a number of characters."""
    place = int(number(value))
    if place < least:
        raise Raised("#VALUE!")
    return place


#: Functions that are followed, with the least and the greatest number of arguments.
NATIVE: dict[str, tuple[Native, int, int]] = {
    "IF": (_if, 2, 3),
    "IFERROR": (_if_error, 2, 2),
    "ISERROR": (_is(lambda value: isinstance(value, Fault)), 1, 1),
    "ISNUMBER": (_is(_is_number), 1, 1),
    "ISTEXT": (_is(lambda value: isinstance(value, str) and not isinstance(value, Fault)), 1, 1),
    "ISBLANK": (_is(lambda value: value is None), 1, 1),
    "INDEX": (_index, 2, 3),
    "MIN": (_over_numbers(lambda numbers: min(numbers, default=0.0)), 1, 255),
    "MAX": (_over_numbers(lambda numbers: max(numbers, default=0.0)), 1, 255),
    "SUM": (_over_numbers(math.fsum), 1, 255),
    "AND": (_of_values(lambda *values: all(map(truth, values))), 1, 255),
    "OR": (_of_values(lambda *values: any(map(truth, values))), 1, 255),
    "NOT": (_of_values(lambda value: not truth(value)), 1, 1),
    "TRUE": (_of_values(lambda: True), 0, 0),
    "FALSE": (_of_values(lambda: False), 0, 0),
    "ABS": (_of_values(lambda value: abs(number(value))), 1, 1),
    "ROUND": (_of_values(_rounded(ROUND_HALF_UP)), 2, 2),
    "ROUNDUP": (_of_values(_rounded(ROUND_UP)), 2, 2),
    "ROUNDDOWN": (_of_values(_rounded(ROUND_DOWN)), 2, 2),
    "LEFT": (_of_values(_left), 1, 2),
    "RIGHT": (_of_values(_right), 1, 2),
    "MID": (_of_values(_mid), 3, 3),
    "LEN": (_of_values(lambda whole: float(len(text(whole)))), 1, 1),
    "FIND": (_of_values(_find), 2, 3),
    "SUBSTITUTE": (_of_values(lambda whole, old, new: text(whole).replace(text(old), text(new))), 3, 3),
}
