"""The *Checks*: every plan at several true values, by the add-in and by the spreadsheet's own functions."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from openpyxl.utils import get_column_letter

from steelyard.workbooks import native
from steelyard.workbooks.house import Book, Live, Piece, Put
from steelyard.workbooks.sheets import rows
from steelyard.workbooks.sheets.answers import AGREES, DIFFERS, NONE
from steelyard.workbooks.sheets.register import ALLOWED, Register
from steelyard.workbooks.sheets.scales import check_values
from steelyard.workbooks.terms import Terms, ask

TITLE = "Checks"
FIRST = 8
RATES = 5

_LETTERS = [get_column_letter(number) for number in range(1, 5 + 3 * RATES)]
_RATES, _OURS, _THEIRS = (_LETTERS[2 + i * RATES : 2 + (i + 1) * RATES] for i in range(3))
_WORST, _VERDICT = _LETTERS[-2:]
_WIDTHS = [5.0, 27.0, *[9.0] * RATES, *[13.0] * (2 * RATES), 12.0, 9.0]


def add_checks(book: Book, register: Register) -> tuple[int, int]:
    """Add the sheet; return how many plans agree, and how many can be checked."""
    sheet = book.sheet(TITLE, dict(zip(_LETTERS, _WIDTHS, strict=True)))
    lines = _lines(book.host, register)
    last = FIRST + len(lines) - 1
    count = sum(isinstance(line[-1], Live) for line in lines)
    agreeing = sum(line[-1].shown == AGREES for line in lines if isinstance(line[-1], Live))
    verdicts = f"${_VERDICT}${FIRST}:${_VERDICT}${last}"
    sheet.add(Put("Checks", "title"))
    sheet.add(
        Put("The power of every plan, by the add-in and by the spreadsheet's own functions.", "subtitle")
    )
    summary = f'=COUNTIF({verdicts},"{AGREES}")&" of {count} plans agree"'
    top = sheet.add(
        Put("Result", "label", 2), Live(summary, f"{agreeing} of {count} plans agree", "verdict", 3)
    )
    sheet.add(Put("Allowed relative difference", "label", 2), Put(ALLOWED, "result tiny"))
    sheet.skip()
    groups = ("True value", "Power by the add-in", "Power by native functions")
    gap = [None] * (RATES - 1)
    sheet.add(None, None, *(piece for text in groups for piece in (Put(text, "section"), *gap)))
    numbers = [str(number) for _ in groups for number in range(1, RATES + 1)]
    texts = ("No.", "Characteristic", *numbers, "Largest relative difference", "Verdict")
    sheet.add(*(Put(text, "heading") for text in texts))
    sheet.rows(lines)
    sheet.flag(verdicts.replace("$", ""), f'={_VERDICT}{FIRST}="{DIFFERS}"')
    sheet.flag(f"C{top}", f'=COUNTIF({verdicts},"{AGREES}")<{count}')
    sheet.freeze(f"C{FIRST}")
    sheet.protect()
    sheet.print_setup(landscape=True, repeat=f"{FIRST - 2}:{FIRST - 1}", area=f"A1:{_VERDICT}{last}")
    return agreeing, count


def _lines(host: str, register: Register) -> list[list[Piece]]:
    """Return the rows of all plans; add-in and native formulas are each computed in one go."""
    planned = register.planned
    points = [check_values(one) for one in planned]
    areas = [f"{_RATES[0]}{FIRST + place}:{_RATES[-1]}{FIRST + place}" for place in range(len(planned))]
    power = ask(host, "POWER", register.column("plan"), Terms(tuple(areas), points))
    summed = native.power_values([one.plan for one in planned], points)
    lines = []
    for place, (array, theirs) in enumerate(zip(power.arrays("result exact"), summed, strict=True)):
        known = [
            register.term("number", place).lives("index")[0],
            register.term("name", place).lives("result")[0],
        ]
        style = f"input {rows.rate_style(planned[place])}"
        given = [Put(rate, style) for rate in points[place]]
        lines.append([*known, *given, array, *_judged(register, place, power.cells[place], theirs)])
    return lines


def _judged(register: Register, place: int, ours: Sequence[Any], theirs: Sequence[float]) -> list[Piece]:
    """Return the native formulas of one plan, the largest difference and the verdict."""
    row = FIRST + place
    formulas = [register.native(place, f"{letters}{row}") for letters in _RATES]
    if not formulas[0]:
        return [*[Put(None, "native")] * RATES, Put(None, "result"), Put(NONE, "verdict")]
    here, there = (f"{letters[0]}{row}:{letters[-1]}{row}" for letters in (_OURS, _THEIRS))
    worst = max(abs(a - b) / (abs(a) + 1e-290) for a, b in zip(ours, theirs, strict=True))
    return [
        *(Live(f"={text}", value, "native exact") for text, value in zip(formulas, theirs, strict=True)),
        Live(f"=SUMPRODUCT(MAX(ABS({here}-{there})/(ABS({here})+1E-290)))", worst, "result tiny"),
        Live(
            f'=IF({_WORST}{row}<=$C$4,"{AGREES}","{DIFFERS}")',
            AGREES if worst <= ALLOWED else DIFFERS,
            "verdict",
        ),
    ]
