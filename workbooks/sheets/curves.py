"""The chart of one plan: power, chance to pass, lines at the claim, the rate to catch, the power wanted.

Its points stand right of what is printed, as array formulas that follow the plan.
"""

from __future__ import annotations

from collections.abc import Sequence

from steelyard.workbooks.charts import Axis, Curve, Role, curve_chart
from steelyard.workbooks.house import LiveArray, Put, Sheet
from steelyard.workbooks.sheets import rows
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.sheets.scales import marks, rate_axis, scale_of
from steelyard.workbooks.terms import Terms, ask

POINTS = 60
_X, _POWER, _PASS = "K", "L", "M"
_HEIGHT, _WIDTH = 6.7, 18.6  # cm


def add_curves(sheet: Sheet, register: Register, place: int) -> None:
    """Draw the chart below what is written."""
    sheet.add(height=6)  # the chart would cover the lines below the table
    planned, top = register.planned[place], sheet.next_row
    rates = scale_of(planned, 1.5).values(POINTS)
    last = top + len(rates)
    _write_points(sheet, register, place, rates)
    lines = _marks(sheet, register, place, rates)
    sheet.next_row = top
    x = sheet.ref(f"{_X}{top + 1}", f"{_X}{last}")
    curves = [
        Curve("Power: claim rejected", x, sheet.ref(f"{_POWER}{top + 1}", f"{_POWER}{last}")),
        Curve("Chance to pass", x, sheet.ref(f"{_PASS}{top + 1}", f"{_PASS}{last}")),
        *lines,
    ]
    name = f"true {planned.kind.parameters[0].name}"
    axes = rate_axis(name, rates[0], rates[-1], rows.rate_style(planned) == "rate"), Axis("probability", 1.0)
    chart = curve_chart("Power and chance to pass", *axes, curves, _WIDTH, _HEIGHT)
    span = f"from {rates[0]:g} to {rates[-1]:g}"
    sheet.chart(chart, f"Power and chance to pass of {planned.text}, by the {name}, {span}.")


def _write_points(sheet: Sheet, register: Register, place: int, rates: Sequence[float]) -> None:
    style = f"plain {rows.rate_style(register.planned[place])}"
    top = sheet.add(*(Put(text, "heading") for text in ("true value", "power", "passes")), column=_X)
    area = Terms((f"${_X}${top + 1}:${_X}${top + len(rates)}",), [[rate] for rate in rates])
    plan, host = register.term("plan", place), sheet.book.host
    answers = [ask(host, name, plan, area) for name in ("POWER", "ACCEPTANCE")]
    for row, rate in enumerate(rates):
        arrays = (
            [LiveArray(f"={answer.texts[0]}", answer.cells, "plain power") for answer in answers]
            if row == 0
            else []
        )
        sheet.add(Put(rate, style), *arrays, column=_X)
        sheet.next_row = top + row + 2


def _marks(sheet: Sheet, register: Register, place: int, rates: Sequence[float]) -> list[Curve]:
    """Write the ends of the lines at the claim, the rates to catch and the power wanted."""
    style = f"plain {rows.rate_style(register.planned[place])}"
    claim, *catches = marks(register.planned[place])
    lines: list[tuple[str, Role, list[tuple[float, float]]]] = [("Claim", "claim", [(claim, 0), (claim, 1)])]
    names = ["Catch"] if len(catches) == 1 else ["Catch, low", "Catch, high"]
    lines += [(name, "catch", [(x, 0), (x, 1)]) for name, x in zip(names, catches, strict=False)]
    wanted = register.value("wanted", place)
    if wanted is not None:
        lines.append(("Power wanted", "target", [(rates[0], wanted), (rates[-1], wanted)]))
    curves = []
    for name, role, ends in lines:
        first = sheet.next_row
        for x, y in ends:
            sheet.add(Put(float(x), style), Put(float(y), "plain power"), column=_X)
        across, up = (sheet.ref(f"{letters}{first}", f"{letters}{first + 1}") for letters in (_X, _POWER))
        curves.append(Curve(name, across, up, role))
    return curves
