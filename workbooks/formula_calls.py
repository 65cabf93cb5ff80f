"""Which calls in a formula are ours, however a program spells them.

``SY_POWER``, ``SY.POWER``, ``sy_power``, behind the number or the path of a link to an add-in
(``[1]!SY_POWER``), or marked as unknown (``_xludf.SY_POWER``): all of these are the same function.
"""

from __future__ import annotations

import re
from functools import lru_cache

from openpyxl.formula.tokenizer import Token, Tokenizer, TokenizerError

from steelyard.core.errors import SteelyardError

_MAYBE_OURS = re.compile(r"SY[_.]", re.IGNORECASE)
_OURS = re.compile(r"(?P<link>.*!)?(?:_xludf\.|_xll\.)?SY[_.](?P<name>[A-Z0-9_]+)\(", re.IGNORECASE)
_MARKS = re.compile(r"^(?:_xl[a-z]+\.)+")
_CALLED = re.compile(r"[\w.\[\]!]+\(")
_NUMBERED = re.compile(r"\[([0-9]+)\]!")
UNREADABLE = "is written in a way that can't be read here"


class Unfollowed(SteelyardError):
    """A formula that can't be computed here; the message says what stands in the way."""


def calls_ours(formula: str) -> bool:
    """Tell whether a formula, without its ``=``, calls one of our functions.

    Examples
    --------
    >>> calls_ours('IF([1]!sy_power(A2,5%)>0.9,"ok","no")'), calls_ours('"SY_POWER(A2)"')
    (True, False)
    """
    if not _MAYBE_OURS.search(formula):
        return False
    return any(_OURS.fullmatch(opening) for opening in _openings(formula))


def numbered_links(formula: str) -> set[int]:
    """Return the numbers of the links through which our functions are called.

    Examples
    --------
    >>> numbered_links("[2]!SY_POWER(A2,[1]Rates!B1)")
    {2}
    """
    calls = (_OURS.fullmatch(opening) for opening in _openings(formula))
    links = (_NUMBERED.fullmatch(call["link"] or "") for call in calls if call)
    return {int(link[1]) for link in links if link}


def as_shown(formula: str) -> str:
    """Return a formula as a person types it: with ``=``, without the prefixes of the file format.

    Examples
    --------
    >>> as_shown("[1]!SY_POWER(A2,B2)-_xlfn.BINOM.DIST(3,50,B2,TRUE)")
    '=SY_POWER(A2,B2)-BINOM.DIST(3,50,B2,TRUE)'
    """
    shown, done = "=", 0
    for opening in _openings(formula):
        start = formula.index(opening, done)
        shown += formula[done:start] + plain_name(opening)
        done = start + len(opening)
    return shown + formula[done:]


def our_name(opening: str) -> str | None:
    """Return the catalogue's name of the function that a bracket opens, or None if it is not ours.

    Examples
    --------
    >>> our_name("[1]!sy.power("), our_name("POWER(")
    ('SY_POWER', None)
    """
    call = _OURS.fullmatch(opening)
    return f"SY_{call['name']}".upper() if call else None


def plain_name(opening: str) -> str:
    """Return the opening of a call without its link, if it is ours, and without marks of the file format."""
    call = _OURS.fullmatch(opening)
    return _MARKS.sub("", opening[len(call["link"] or "") :] if call else opening)


def read_tokens(formula: str) -> list[Token]:
    """Return the tokens of a formula without its ``=``.

    Raises
    ------
    Unfollowed
        For what is no formula.
    """
    try:
        return list(Tokenizer(f"={formula}").items)
    except (TokenizerError, IndexError):
        raise Unfollowed(UNREADABLE) from None


@lru_cache(65_536)
def _openings(formula: str) -> tuple[str, ...]:
    """Return the function names in a formula, each with its bracket, in their order.

    Of a formula that can't be read rather too many than too few, so that no call of ours is overlooked.
    """
    try:
        tokens = read_tokens(formula)
    except Unfollowed:
        return tuple(_CALLED.findall(formula))
    return tuple(token.value for token in tokens if token.type == Token.FUNC and token.subtype == Token.OPEN)
