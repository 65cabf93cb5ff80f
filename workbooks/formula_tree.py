"""Formulas as trees of calls, operators, constants, names and references."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

from openpyxl.formula.tokenizer import Token
from openpyxl.utils.cell import range_boundaries

from steelyard.workbooks.formula_calls import UNREADABLE, Unfollowed, our_name, plain_name, read_tokens
from steelyard.workbooks.pieces import Fault, Value

_FIXED = re.compile(r"\$[A-Z]+\$[0-9]+(:\$[A-Z]+\$[0-9]+)?", re.IGNORECASE)
_STRANGE = "holds an operator on ranges"
_RAISED = {"=": 1, "<": 1, ">": 1, "<=": 1, ">=": 1, "<>": 1, "&": 2, "+": 3, "-": 3, "*": 4, "/": 4, "^": 5}


@dataclass(frozen=True, slots=True)
class Literal:
    """A constant; an error value is a `Fault`."""

    value: Value


@dataclass(frozen=True, slots=True)
class Rows:
    """An array constant."""

    rows: tuple[tuple[Value, ...], ...]


@dataclass(frozen=True, slots=True)
class Area:
    """A cell or a range, of the formula's own sheet if none is named; columns and rows count from 1."""

    sheet: str
    left: int
    top: int
    right: int
    bottom: int
    one_cell: bool
    fixed: bool


@dataclass(frozen=True, slots=True)
class Name:
    """A defined name, and the sheet before it, if any."""

    sheet: str
    name: str


@dataclass(frozen=True, slots=True)
class Call:
    """A call of a function; an argument that is left out is None."""

    name: str
    ours: bool
    arguments: tuple[Tree | None, ...]


@dataclass(frozen=True, slots=True)
class Operation:
    """An operator with one or two operands; ``%`` follows its operand."""

    sign: str
    operands: tuple[Tree, ...]


Tree = Literal | Rows | Area | Name | Call | Operation


@lru_cache(65_536)
def read_formula(formula: str) -> Tree:
    """Return a formula, without its ``=``, as a tree.

    Raises
    ------
    Unfollowed
        For what is no plain formula of calls, operators, constants, names and references.

    Examples
    --------
    >>> read_formula("sy.size(A2)").name
    'SY_SIZE'
    """
    tokens = [token for token in read_tokens(formula) if token.type != Token.WSPACE]
    try:
        return _Reader(tokens).whole()
    except RecursionError:
        raise Unfollowed(UNREADABLE) from None


def references(tree: Tree | None) -> Iterator[Area | Name]:
    """Yield the cells, ranges and names that a tree refers to."""
    match tree:
        case Area() | Name():
            yield tree
        case Call(arguments=inner) | Operation(operands=inner):
            for part in inner:
                yield from references(part)


class _Reader:
    """Reads the tokens of one formula from left to right."""

    def __init__(self, tokens: list[Token]) -> None:
        self._tokens, self._place = tokens, 0

    def whole(self) -> Tree:
        tree = self._expression(0)
        if self._next() is not None:
            raise Unfollowed(_STRANGE)
        return tree

    def _next(self) -> Token | None:
        return self._tokens[self._place] if self._place < len(self._tokens) else None

    def _at(self, kind: str, subtype: str) -> bool:
        token = self._next()
        return token is not None and (token.type, token.subtype) == (kind, subtype)

    def _take(self) -> Token:
        token = self._next()
        if token is None:
            raise Unfollowed(UNREADABLE)
        self._place += 1
        return token

    def _expression(self, above: int) -> Tree:
        """Read operators that bind more tightly than a level; all of them group from left to right."""
        left = self._operand()
        while (token := self._next()) and _RAISED.get(_infix(token), 0) > above:
            self._take()
            left = Operation(token.value, (left, self._expression(_RAISED[token.value])))
        return left

    def _operand(self) -> Tree:
        token = self._take()
        if token.type == Token.OP_PRE:
            return Operation(token.value, (self._operand(),))
        tree = self._primary(token)
        while (token_after := self._next()) and token_after.type == Token.OP_POST:
            tree = Operation(self._take().value, (tree,))
        return tree

    def _primary(self, token: Token) -> Tree:
        match token.type, token.subtype:
            case Token.PAREN, Token.OPEN:
                tree = self._expression(0)
                self._close(Token.PAREN)
                return tree
            case Token.FUNC, Token.OPEN:
                return self._call(token.value)
            case Token.ARRAY, Token.OPEN:
                return self._array()
            case Token.OPERAND, Token.RANGE:
                return _reference(token.value)
            case Token.OPERAND, _:
                return Literal(_constant(token))
        raise Unfollowed(UNREADABLE)

    def _call(self, opening: str) -> Tree:
        arguments = [] if self._at(Token.FUNC, Token.CLOSE) else [self._argument()]
        while self._at(Token.SEP, Token.ARG):
            self._take()
            arguments.append(self._argument())
        self._close(Token.FUNC)
        ours = our_name(opening)
        name = ours or plain_name(opening)[:-1].upper()
        return Call(name, ours is not None, tuple(arguments))

    def _argument(self) -> Tree | None:
        left_out = self._at(Token.SEP, Token.ARG) or self._at(Token.FUNC, Token.CLOSE)
        return None if left_out else self._expression(0)

    def _array(self) -> Tree:
        rows: list[list[Value]] = [[]]
        while (token := self._take()).type != Token.ARRAY:
            if token.type == Token.SEP:
                rows += [[]] if token.subtype == Token.ROW else []
                continue
            sign = token.value if token.type == Token.OP_PRE else ""
            value = _constant(self._take() if sign else token)
            rows[-1].append(-value if sign == "-" and isinstance(value, float) else value)
        return Rows(tuple(map(tuple, rows)))

    def _close(self, kind: str) -> None:
        token = self._take()
        if (token.type, token.subtype) != (kind, Token.CLOSE):
            raise Unfollowed(_STRANGE)


def _infix(token: Token) -> str:
    return str(token.value) if token.type == Token.OP_IN else ""


def _constant(token: Token) -> Value:
    match token.subtype:
        case Token.TEXT:
            return str(token.value[1:-1].replace('""', '"'))
        case Token.NUMBER:
            return float(token.value)
        case Token.LOGICAL:
            return bool(token.value.upper() == "TRUE")
        case Token.ERROR:
            return Fault(token.value.upper())
    raise Unfollowed(UNREADABLE)


def _reference(text: str) -> Tree:
    place, _, cells = text.rpartition("!")
    sheet = place[1:-1].replace("''", "'") if place.startswith("'") else place
    if "[" in place:
        message = "refers to another workbook"
        raise Unfollowed(message)
    if "[" in cells or "#" in cells:
        message = f"refers to cells as {cells}: use plain references such as B2 or B2:B9"
        raise Unfollowed(message)
    try:
        corners = range_boundaries(cells.upper())
    except ValueError:
        return Name(sheet, cells)
    if None in corners:
        message = f"refers to whole columns or rows ({cells})"
        raise Unfollowed(message)
    left, top, right, bottom = corners
    area = (min(left, right), min(top, bottom), max(left, right), max(top, bottom))
    return Area(sheet, *area, ":" not in cells, _FIXED.fullmatch(cells) is not None)
