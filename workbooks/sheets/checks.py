"""The *Checks*: every plan at several true values, by the add-in and by the spreadsheet's own functions."""

from __future__ import annotations

from openpyxl.utils import get_column_letter

from steelyard.workbooks import native
from steelyard.workbooks.house import Book, Live, Piece, Put, Sheet
from steelyard.workbooks.sheets import rows
from steelyard.workbooks.sheets.register import AGREES, DIFFERS, Register
from steelyard.workbooks.terms import across, ask

TITLE = "Checks"
FIRST = 8
RATES = 5
ALLOWED = 1e-9

_LETTERS = [get_column_letter(number) for number in range(1, 5 + 3 * RATES)]
_RATES, _OURS, _THEIRS = (_LETTERS[2 + i * RATES : 2 + (i + 1) * RATES] for i in range(3))
_WORST, _VERDICT = _LETTERS[-2:]
_WIDTHS = [5.0, 27.0, *[9.0] * RATES, *[13.0] * (2 * RATES), 12.0, 9.0]


def check_rates(register: Register, place: int) -> list[float]:
    """Return true values to check a plan at: around its claim and what it must catch."""
    planned = register.planned[place]
    assert planned.plan.claim is not None
    claim, catch = planned.plan.claim.value, register.value("catch_own", place)
    upper = float(planned.extra or 0) if rows.in_lots(planned) else planned.kind.parameters[0].upper
    far = float(catch) if catch is not None else 2 * claim
    wanted = [claim / 2, claim, (claim + far) / 2, far, 1.5 * max(claim, far)]
    digits = [f"{min(rate, upper):.6g}" for rate in wanted]
    return [float(round(float(text))) if rows.in_lots(planned) else float(text) for text in digits]


def add_checks(book: Book, register: Register) -> Sheet:
    """Add the sheet and return it."""
    sheet = book.sheet(TITLE, dict(zip(_LETTERS, _WIDTHS, strict=True)))
    lines = [_line(book.host, register, place) for place in range(len(register.planned))]
    count, last = len(lines), FIRST + len(lines) - 1
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
    sheet.flag(verdicts.replace("$", ""), f'={_VERDICT}{FIRST}<>"{AGREES}"')
    sheet.flag(f"C{top}", f'=COUNTIF({verdicts},"{AGREES}")<{count}')
    sheet.freeze(f"C{FIRST}")
    sheet.protect()
    sheet.print_setup(landscape=True, repeat=f"{FIRST - 2}:{FIRST - 1}", area=f"A1:{_VERDICT}{last}")
    return sheet


def _line(host: str, register: Register, place: int) -> list[Piece]:
    """Return one plan's row."""
    planned, row, points = register.planned[place], FIRST + place, check_rates(register, place)
    rates, ours, theirs = (f"{letters[0]}{row}:{letters[-1]}{row}" for letters in (_RATES, _OURS, _THEIRS))
    power = ask(host, "POWER", register.term("plan", place), across(rates, points))
    natively = native.power_values(planned.plan, points)
    worst = max(abs(a - b) / (abs(a) + 1e-290) for a, b in zip(power.cells[0], natively, strict=True))
    verdict = AGREES if worst <= ALLOWED else DIFFERS
    return [
        *register.term("number", place).lives("index"),
        *register.term("name", place).lives("result"),
        *(Put(rate, f"input {rows.rate_style(planned)}") for rate in points),
        *power.arrays("result exact"),
        *(
            Live(f"={register.native(place, f'{letters}{row}')}", value, "native exact")
            for letters, value in zip(_RATES, natively, strict=True)
        ),
        Live(f"=SUMPRODUCT(MAX(ABS({ours}-{theirs})/(ABS({ours})+1E-290)))", worst, "result tiny"),
        Live(f'=IF({_WORST}{row}<=$C$4,"{AGREES}","{DIFFERS}")', verdict, "verdict"),
    ]
