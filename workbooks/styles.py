"""The look of every sheet: one palette, one font, named styles of looks and number formats.

A style is one or two words: a look, a number format, or both (``"input rate"``, ``"result power"``,
``"native power"``). Looks differ in border and slant as well as in colour, so that they stay apart in grey
print and for colour-blind readers.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

from openpyxl.styles import Alignment, Border, Font, NamedStyle, PatternFill, Protection, Side

from steelyard.core.errors import InvalidValue

#: Arial and Liberation Sans have the same widths, so a sheet breaks its lines alike in both hosts.
FONT = "Arial"
SIZE = 10

INK, SLATE, LINE, WHITE = "1E2933", "55636F", "A9B4BD", "FFFFFF"
RIVER, MIST, DEEP = "1B5E83", "E2EDF3", "7FB2D1"  # titles, headings, upper end of the colour scale
WHEAT, SAGE, BLUSH, RUST = "FFF3CF", "EAF2E3", "FBE4DA", "96341A"  # input, native, warning and its text

#: Curves in the order they are given: dark and light take turns, so that neighbours differ in grey too.
CURVES = ("1B5E83", "C2571A", "3B3B3B", "5E9E3F", "7A3F8C", "B08900")


@dataclass(frozen=True, slots=True)
class Look:
    """How a cell looks, whatever it holds; a text that may `spill` does not widen its column."""

    colour: str = INK
    size: int = SIZE
    bold: bool = False
    italic: bool = False
    fill: str = ""
    border: str = ""
    edge: str = LINE
    wrap: bool = False
    across: str = "general"
    upright: str = "top"
    locked: bool = True
    spill: bool = False


@dataclass(frozen=True, slots=True)
class Digits:
    """A number format and the number of characters that it usually needs."""

    code: str
    width: int


LOOKS = {
    "plain": Look(),
    "title": Look(RIVER, 16, bold=True, spill=True),
    "subtitle": Look(SLATE, 11, spill=True),
    "section": Look(RIVER, 12, bold=True, spill=True),
    "heading": Look(
        bold=True, fill=MIST, border="bottom", edge=RIVER, wrap=True, across="center", upright="center"
    ),
    "label": Look(bold=True, across="left"),
    "text": Look(wrap=True, across="left"),
    "cell": Look(border="hair", wrap=True, across="left"),
    "unit": Look(SLATE, across="left"),
    "input": Look(fill=WHEAT, border="box", locked=False),
    "tick": Look(fill=WHEAT, border="box", across="center", upright="center", locked=False),
    "pick": Look(fill=WHEAT, border="box", across="center", locked=False),
    "edit": Look(fill=WHEAT, border="box", wrap=True, across="left", locked=False),
    "entry": Look(border="hair", wrap=True, across="left", locked=False),
    "writing": Look(border="bottom", edge=SLATE, wrap=True, across="left", upright="bottom", locked=False),
    "index": Look(SLATE, border="hair", across="center"),
    "result": Look(border="hair"),
    "verdict": Look(bold=True, border="hair", across="center"),
    "strong": Look(bold=True, border="box"),
    "native": Look(italic=True, fill=SAGE, border="hair"),
    "note": Look(SLATE, 9, italic=True, wrap=True, across="left"),
    "warning": Look(RUST, bold=True, fill=BLUSH, border="box", edge=RUST, wrap=True, across="left"),
    "link": Look(RIVER, across="left"),
}

#: Formats of numbers; sections in brackets show more digits where a risk is small.
DIGITS = {
    "count": Digits("#,##0", 8),
    "number": Digits("General", 9),
    "value": Digits("[>=10]0.00;[>=1]0.000;0.00000", 9),
    "power": Digits("0.0000", 7),
    "risk": Digits("[=0]0%;[<0.001]0.0000%;0.00%", 8),
    "rate": Digits("0.0###%", 7),
    "percent": Digits("0.00%", 8),
    "ppm": Digits("#,##0.0", 9),
    "tiny": Digits("[=0]0;[<0.001]0.00E+00;0.0000", 9),
    "exact": Digits("0.0000000000", 13),
    "date": Digits("yyyy-mm-dd", 11),
    "words": Digits("@", 12),  # what is typed here stays text, even if it looks like a formula
}


@cache
def read_style(words: str) -> tuple[Look, Digits | None, str]:
    """Return look and format of a style's words, and the style's name in the workbook.

    Raises
    ------
    InvalidValue
        For a word that is neither a look nor a format.

    Examples
    --------
    >>> read_style("input rate")[1].code
    '0.0###%'
    """
    look, digits = LOOKS["plain"], None
    for word in words.split():
        if word in LOOKS:
            look = LOOKS[word]
        elif word in DIGITS:
            digits = DIGITS[word]
        else:
            allowed = ", ".join([*LOOKS, *DIGITS])
            rule = f"be made of {allowed}"
            raise InvalidValue("style", rule, words)
    return look, digits, f"SY {words}"


@cache
def _border(kind: str, colour: str) -> Border:
    line = Side("hair" if kind == "hair" else "thin", color=colour)
    match kind:
        case "":
            return Border()
        case "box":
            return Border(line, line, line, line)
        case _:
            return Border(bottom=line)


def named_style(words: str) -> NamedStyle:
    """Return a new named style for one workbook."""
    look, digits, name = read_style(words)
    style = NamedStyle(
        name=name,
        font=Font(name=FONT, size=look.size, bold=look.bold, italic=look.italic, color=look.colour),
        border=_border(look.border, look.edge),
        alignment=Alignment(horizontal=look.across, vertical=look.upright, wrap_text=look.wrap),
        protection=Protection(locked=look.locked),
    )
    if look.fill:
        style.fill = PatternFill("solid", start_color=look.fill, end_color=look.fill)
    if digits is not None:
        style.number_format = digits.code
    return style
