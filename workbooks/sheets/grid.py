"""The *Power grid*: plans down, true values across, a block with a chart for each parameter and scale."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from openpyxl.utils import get_column_letter

from steelyard.workbooks.charts import Axis, Curve, curve_chart
from steelyard.workbooks.house import Book, Put, Sheet, between
from steelyard.workbooks.sheets import paper, rows
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.sheets.scales import clean, nice, rate_axis
from steelyard.workbooks.terms import Terms, across, ask, column

TITLE = "Power grid"
STEPS = 20
MOST_CURVES = 12

_SPREAD = 4  # plans whose scales differ by more stand in another block
_LEFT, _RIGHT = get_column_letter(4), get_column_letter(4 + STEPS)


@dataclass(frozen=True, slots=True)
class Block:
    """Characteristics (places in the register) that share an axis of `STEPS` steps from 0."""

    places: tuple[int, ...]
    step: float

    @property
    def rates(self) -> list[float]:
        """The true values across."""
        return [clean(self.step * i) for i in range(STEPS + 1)]


def blocks(register: Register) -> list[Block]:
    """Group the characteristics by parameter and scale, in the register's order."""
    found: list[Block] = []
    symbols = [planned.kind.parameters[0].symbol for planned in register.planned]
    for symbol in dict.fromkeys(symbols):
        places = [place for place, other in enumerate(symbols) if other == symbol]
        reach = {place: _reach(register, place) for place in places}
        groups: list[list[int]] = []
        for place in sorted(places, key=reach.__getitem__):
            if groups and reach[place] <= _SPREAD * reach[groups[-1][0]]:
                groups[-1].append(place)
            else:
                groups.append([place])
        found += [_block(register, sorted(group), max(reach[place] for place in group)) for group in groups]
    return found


def _reach(register: Register, place: int) -> float:
    """Return the largest true value that matters to a plan: its claim, or what it must catch."""
    claim = register.planned[place].plan.claim
    given = [register.value(key, place) for key in ("catch_own", "second_own")]
    return max([float(rate) for rate in (*given, claim and claim.value) if rate], default=1.0)


def _block(register: Register, places: Sequence[int], reach: float) -> Block:
    members = [register.planned[place] for place in places]
    if rows.in_lots(members[0]):
        most = min(int(planned.extra or 0) for planned in members)
        step = float(max(1, min(math.ceil(nice(1.3 * reach / STEPS)), most // STEPS)))
    else:
        upper = members[0].kind.parameters[0].upper
        step = min(nice(1.3 * reach / STEPS), upper / STEPS)
    return Block(tuple(places), step)


def add_grid(book: Book, register: Register) -> Sheet:
    """Add the sheet and return it."""
    widths = {"A": 5.0, "B": 27.0, "C": 44.0}
    widths |= {get_column_letter(4 + i): 7.6 for i in range(STEPS + 1)}
    sheet = book.sheet(TITLE, widths)
    sheet.add(Put("Power grid", "title"))
    sheet.add(Put("The chance that each plan rejects its claim, by the true value.", "subtitle"))
    sheet.add(
        Put(
            "Yellow cells may be edited: other plans down, other true values across. The charts follow.",
            "note",
            12,
        )
    )
    for number, block in enumerate(blocks(register)):
        sheet.skip()
        if number:
            paper.break_here(sheet)
        _add_block(sheet, register, block)
    sheet.freeze("C4")
    sheet.protect()
    sheet.print_setup(landscape=True, area=f"A1:{_RIGHT}{sheet.next_row - 1}")
    paper.fixed_scale(sheet, 58)
    return sheet


def _add_block(sheet: Sheet, register: Register, block: Block) -> None:
    first = register.planned[block.places[0]]
    parameter, style = first.kind.parameters[0], rows.rate_style(first)
    name, rates = f"{parameter.name}, {parameter.symbol}", block.rates
    upper = min(parameter.upper, 1e9)
    check = between(parameter.lower, upper, "True value", parameter.unit, whole=rows.in_lots(first))
    sheet.add(Put(f"True {name}, from 0 to {_shown(rates[-1], style)}", "section"))
    head = sheet.add(
        *(Put(text, "heading") for text in ("No.", "Characteristic", "Plan")),
        *(Put(rate, f"input {style}", check=check) for rate in rates),
    )
    plans = column("$C", head + 1, [register.value("plan", place) for place in block.places])
    power = ask(sheet.book.host, "POWER", plans, across(f"${_LEFT}${head}:${_RIGHT}${head}", rates))
    for place, array in zip(block.places, power.arrays("result power"), strict=True):
        looks = (("number", "index"), ("name", "result"), ("plan", "edit"))
        sheet.add(*(register.term(key, place).lives(look)[0] for key, look in looks), array)
    sheet.colour_scale(f"{_LEFT}{head + 1}:{_RIGHT}{sheet.next_row - 1}")
    drawn = range(head + 1, sheet.next_row)
    if len(drawn) > MOST_CURVES:
        drawn = _choose(sheet, drawn, register, block, power)
    _add_chart(sheet, name, style, head, drawn, rates[-1])


def _shown(rate: float, style: str) -> str:
    return f"{100 * rate:.6g} %" if style == "rate" else f"{rate:g}"


def _choose(sheet: Sheet, table: range, register: Register, block: Block, power: Terms) -> range:
    """Write the rows that the chart draws, each chosen by its place in the table above; return them."""
    sheet.skip()
    sheet.add(Put("Curves that the chart draws: choose each by its place in the table above.", "note", 12))
    first = sheet.next_row
    check = between(1, len(table), "Curve", "The row's place in the table above.", whole=True)
    for pick in range(MOST_CURVES):
        shown = [register.value("name", block.places[pick]), register.value("plan", block.places[pick])]
        cells = [
            Terms((f"INDEX({letters}${table[0]}:{letters}${table[-1]},$A{sheet.next_row})",), [[value]])
            for letters, value in zip(
                map(get_column_letter, range(2, 5 + STEPS)), [*shown, *power.cells[pick]], strict=True
            )
        ]
        looks = ["result", "cell", *["result power"] * (STEPS + 1)]
        lives = [cell.lives(look)[0] for cell, look in zip(cells, looks, strict=True)]
        sheet.add(Put(pick + 1, "input count", check=check), *lives)
    return range(first, sheet.next_row)


def _add_chart(sheet: Sheet, name: str, style: str, head: int, drawn: range, end: float) -> None:
    x = sheet.ref(f"{_LEFT}{head}", f"{_RIGHT}{head}")
    curves = [Curve(sheet.ref(f"B{row}"), x, sheet.ref(f"{_LEFT}{row}", f"{_RIGHT}{row}")) for row in drawn]
    axis = rate_axis(f"true {name}", end, percent=style == "rate")
    sheet.skip()
    chart = curve_chart(
        "Power by the true value", axis, Axis("power: chance of rejecting", 1.0), curves, 42.5, 13.0
    )
    sheet.chart(
        chart,
        f"Power of {len(curves)} plans from 0 to 100 %, by the true {name}, from 0 to {_shown(end, style)}.",
    )
