"""The *Power grid*: plans down, true values across, a block with a chart for each parameter and scale."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from openpyxl.utils import get_column_letter

from steelyard.workbooks.charts import Axis, Curve, curve_chart
from steelyard.workbooks.house import Book, Live, Put, Sheet, Value, between
from steelyard.workbooks.plans import Planned
from steelyard.workbooks.sheets import paper, rows
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.sheets.scales import Scale, common, rate_axis, scale_of
from steelyard.workbooks.terms import across, ask, column

TITLE = "Power grid"
STEPS = 20
MOST_CURVES = 12

_SPREAD = 4  # plans whose scales differ by more stand in another block
_FIRST_RATE = 4  # the column of the first true value
_LEFT, _RIGHT = get_column_letter(_FIRST_RATE), get_column_letter(_FIRST_RATE + STEPS)


@dataclass(frozen=True, slots=True)
class Block:
    """Characteristics (places in the register) that share an axis of true values."""

    places: tuple[int, ...]
    rates: tuple[float, ...]

    @property
    def right(self) -> str:
        """The column of the last true value."""
        return str(get_column_letter(_FIRST_RATE + len(self.rates) - 1))


@dataclass(slots=True)
class _Group:
    """Characteristics that one axis shows well; grows while it is found."""

    places: list[int]
    low: float
    high: float
    least: float

    def take(self, place: int, scale: Scale) -> bool:
        """Take another characteristic unless a scale would be too small for the axis; tell whether."""
        low, high = min(self.low, scale.low), max(self.high, scale.high)
        least = min(self.least, scale.high - scale.low)
        if high - low > _SPREAD * least:
            return False
        self.places.append(place)
        self.low, self.high, self.least = low, high, least
        return True


def blocks(planned: Sequence[Planned]) -> list[Block]:
    """Group the characteristics by parameter and scale, in the register's order."""
    result: list[Block] = []
    symbols = [one.kind.parameters[0].symbol for one in planned]
    for symbol in dict.fromkeys(symbols):
        scales = {place: scale_of(planned[place], 1.3) for place, own in enumerate(symbols) if own == symbol}
        groups: list[_Group] = []
        for place, scale in sorted(scales.items(), key=lambda item: item[1].high):
            if not groups or not groups[-1].take(place, scale):
                groups.append(_Group([place], scale.low, scale.high, scale.high - scale.low))
        result += [_block(group.places, [scales[place] for place in group.places]) for group in groups]
    return result


def _block(places: Sequence[int], scales: Sequence[Scale]) -> Block:
    scale = common(scales)
    tried = (scale.values(parts) for parts in range(STEPS, 0, -1))
    return Block(tuple(sorted(places)), tuple(next(rates for rates in tried if len(rates) <= STEPS + 1)))


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
    for number, block in enumerate(blocks(register.planned)):
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
    parameter, style, rates = first.kind.parameters[0], rows.rate_style(first), block.rates
    name = f"true {parameter.name}, {parameter.symbol}"
    span = " to ".join(
        f"{100 * rate:.6g} %" if style == "rate" else f"{rate:.6g}" for rate in (rates[0], rates[-1])
    )
    sheet.add(Put(f"{name[0].upper()}{name[1:]}, from {span}", "section"))
    lower, upper = max(parameter.lower, -1e9), min(parameter.upper, 1e9)
    check = between(lower, upper, "True value", parameter.unit, whole=rows.in_lots(first))
    head = sheet.add(
        *(Put(text, "heading") for text in ("No.", "Characteristic", "Plan")),
        *(Put(rate, f"input {style}", check=check) for rate in rates),
    )
    plans = column("$C", head + 1, [register.value("plan", place) for place in block.places])
    power = ask(sheet.book.host, "POWER", plans, across(f"${_LEFT}${head}:${block.right}${head}", rates))
    for place, array in zip(block.places, power.arrays("result power"), strict=True):
        looks = (("number", "index"), ("name", "result"), ("plan", "edit"))
        sheet.add(*(register.term(key, place).lives(look)[0] for key, look in looks), array)
    sheet.colour_scale(f"{_LEFT}{head + 1}:{block.right}{sheet.next_row - 1}")
    drawn = range(head + 1, sheet.next_row)
    if len(drawn) > MOST_CURVES:
        shown = [[register.value(key, place) for key in ("name", "plan")] for place in block.places]
        drawn = _choose(
            sheet, drawn, [[*texts, *line] for texts, line in zip(shown, power.cells, strict=True)]
        )
    x = sheet.ref(f"{_LEFT}{head}", f"{block.right}{head}")
    curves = [
        Curve(sheet.ref(f"B{row}"), x, sheet.ref(f"{_LEFT}{row}", f"{block.right}{row}")) for row in drawn
    ]
    sheet.skip()
    axes = rate_axis(name, rates[0], rates[-1], style == "rate"), Axis("power: chance of rejecting", 1.0)
    chart = curve_chart("Power by the true value", *axes, curves, 42.5, 13.0)
    sheet.chart(chart, f"Power of {len(curves)} plans from 0 to 100 %, by the {name}, from {span}.")


def _choose(sheet: Sheet, table: range, cells: Sequence[Sequence[Value]]) -> range:
    """Write the rows that the chart draws, each chosen by its place in the table above; return them."""
    sheet.skip()
    sheet.add(Put("Curves that the chart draws: choose each by its place in the table above.", "note", 12))
    first, check = (
        sheet.next_row,
        between(1, len(table), "Curve", "The row's place in the table.", whole=True),
    )
    letters = [get_column_letter(2 + number) for number in range(len(cells[0]))]
    looks = ["result", "cell", *["result power"] * (len(letters) - 2)]
    for pick in range(MOST_CURVES):
        lives = [
            Live(f"=INDEX({own}${table[0]}:{own}${table[-1]},$A{sheet.next_row})", value, look)
            for own, value, look in zip(letters, cells[pick], looks, strict=True)
        ]
        sheet.add(Put(pick + 1, "input count", check=check), *lives)
    return range(first, sheet.next_row)
