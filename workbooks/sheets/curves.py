"""The chart of one plan: power, chance to pass, lines at the claim, the rate to catch, the power wanted.

Its points stand right of what is printed, as array formulas that follow the plan.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from steelyard.workbooks.charts import Axis, Curve, Role, curve_chart
from steelyard.workbooks.house import LiveArray, Put, Sheet
from steelyard.workbooks.sheets import rows
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.sheets.scales import clean, nice, rate_axis
from steelyard.workbooks.terms import Terms, ask

POINTS = 60
_X, _POWER, _PASS = "K", "L", "M"
_HEIGHT, _WIDTH = 6.7, 18.6  # cm


def marked_rates(register: Register, place: int) -> list[float]:
    """Return the claim's boundary and the rates to catch of one plan."""
    claim = register.planned[place].plan.claim
    given = [claim and claim.value, *(register.value(key, place) for key in ("catch_own", "second_own"))]
    return [float(rate) for rate in given if rate is not None]


def table_rates(register: Register, place: int, count: int) -> list[float]:
    """Return round true values from 0 to beyond what matters to a plan, the marked ones among them."""
    planned, marked = register.planned[place], marked_rates(register, place)
    lots = rows.in_lots(planned)
    upper = float(planned.extra or 0) if lots else planned.kind.parameters[0].upper
    end = min(1.5 * max(marked), upper)
    found = set(marked)
    for parts in range(count, 1, -1):
        step = max(1.0, float(math.ceil(nice(end / parts)))) if lots else nice(end / parts)
        steps = [clean(step * i) for i in range(math.ceil(end / step - 1e-9) + 1)]
        tried = {rate for rate in steps if rate <= upper} | set(marked)
        if len(tried) <= count:
            found = tried
            break
    return sorted(found | set(_more(found, count - len(found), lots, upper)))


def _more(found: set[float], missing: int, lots: bool, upper: float) -> list[float]:
    """Return values that fill the widest gaps."""
    values, added = sorted(found), []
    for _ in range(missing):
        gap = max(range(len(values) - 1), key=lambda i: values[i + 1] - values[i])
        middle = (values[gap] + values[gap + 1]) / 2
        rate = float(math.floor(middle)) if lots else float(f"{middle:.6g}")
        if rate in values:  # every whole number is there: go on behind the last
            rate = min(values[-1] + 1, upper)
        values = sorted({*values, rate})
        added.append(rate)
    return added


def add_curves(sheet: Sheet, register: Register, place: int, end: float) -> None:
    """Draw the chart below what is written."""
    sheet.add(height=6)  # the chart would cover the lines below the table
    planned, top = register.planned[place], sheet.next_row
    lots = rows.in_lots(planned)
    step = float(max(1, math.ceil(end / POINTS))) if lots else end / POINTS
    rates = [clean(step * i) for i in range(math.floor(end / step + 1e-9) + 1)]
    last = top + len(rates)
    _write_points(sheet, register, place, rates)
    lines = _marks(sheet, register, place, end)
    sheet.next_row = top
    x = sheet.ref(f"{_X}{top + 1}", f"{_X}{last}")
    curves = [
        Curve("Power: claim rejected", x, sheet.ref(f"{_POWER}{top + 1}", f"{_POWER}{last}")),
        Curve("Chance to pass", x, sheet.ref(f"{_PASS}{top + 1}", f"{_PASS}{last}")),
        *lines,
    ]
    name = f"true {planned.kind.parameters[0].name}"
    axis = rate_axis(name, end, percent=rows.rate_style(planned) == "rate")
    chart = curve_chart(
        "Power and chance to pass",
        axis,
        Axis("probability", 1.0),
        curves,
        _WIDTH,
        _HEIGHT,
    )
    sheet.chart(chart, f"Power and chance to pass of {planned.text}, by the {name}, from 0 to {end:g}.")


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


def _marks(sheet: Sheet, register: Register, place: int, end: float) -> list[Curve]:
    """Write the ends of the lines at the claim, the rates to catch and the power wanted."""
    style = f"plain {rows.rate_style(register.planned[place])}"
    claim, *catches = marked_rates(register, place)
    lines: list[tuple[str, Role, list[tuple[float, float]]]] = [("Claim", "claim", [(claim, 0), (claim, 1)])]
    names = ["Catch"] if len(catches) == 1 else ["Catch, low", "Catch, high"]
    lines += [(name, "catch", [(x, 0), (x, 1)]) for name, x in zip(names, catches, strict=False)]
    wanted = register.value("wanted", place)
    if wanted is not None:
        lines.append(("Power wanted", "target", [(0, wanted), (end, wanted)]))
    curves = []
    for name, role, ends in lines:
        first = sheet.next_row
        for x, y in ends:
            sheet.add(Put(float(x), style), Put(float(y), "plain power"), column=_X)
        across, up = (sheet.ref(f"{letters}{first}", f"{letters}{first + 1}") for letters in (_X, _POWER))
        curves.append(Curve(name, across, up, role))
    return curves
