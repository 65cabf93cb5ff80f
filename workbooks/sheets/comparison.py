"""The *Comparison*: up to six plans on the same axes, what each costs in items and what it risks."""

from __future__ import annotations

from collections.abc import Sequence

from openpyxl.utils import get_column_letter

from steelyard.addin import call
from steelyard.workbooks.charts import Axis, Curve, curve_chart
from steelyard.workbooks.house import Book, Live, Put, Sheet, Value
from steelyard.workbooks.plans import Planned
from steelyard.workbooks.sheets import paper, rows
from steelyard.workbooks.sheets.scales import marks, rate_axis, scale_of
from steelyard.workbooks.terms import Terms, across, ask, column

TITLE = "Comparison"
MOST = 6
STEPS = 15

_LETTERS = [get_column_letter(number) for number in range(1, 5 + STEPS + 1)]
_FIRST_RATE = 3  # index of the first true value's column
_WIDTHS = (5.0, 24.0, 50.0, *[9.6] * (STEPS + 2))


def subject_of(planned: Sequence[Planned]) -> Planned | None:
    """Return the characteristic to compare plans for: the first whose size was sought, above its claim."""
    wanted = (
        one for one in planned if one.plan.kind == "binomial" and one.side == "above" and one.own_catches
    )
    return next((one for one in wanted if one.request.n is None), None)


def alternatives(planned: Planned) -> list[tuple[str, str]]:
    """Return names and texts of plans that a reader would weigh against each other."""
    claim, (catch, *_) = marks(planned)[0], planned.own_catches
    power = float(planned.request.power or 0.9)
    risks = (claim, planned.alpha, catch, power)
    half = max(1, round(planned.extent / 2))
    found = [
        ("As planned", planned.text),
        ("Lasting size", call("SMALLEST", ["binomial", *risks, None, "lasting"])),
        ("Half the items", call("BINOMIAL", [half, claim, planned.alpha])),
        ("Two samples", call("DOUBLE", ["binomial", *risks])),
        ("Reject on the first", f"binomial | n {half} | claim p<={claim!r} | reject x>=1"),
    ]
    return [(name, text) for name, text in found if not text.startswith("SY:")]


def add_comparison(book: Book, planned: Sequence[Planned]) -> Sheet | None:
    """Add the sheet, or nothing where no characteristic suits; return it."""
    subject = subject_of(planned)
    if subject is None:
        return None
    sheet = book.sheet(TITLE, dict(zip(_LETTERS, _WIDTHS, strict=False)))
    sheet.add(Put("Comparison of plans", "title"))
    sheet.add(Put(f"Alternatives for: {subject.request.characteristic}", "subtitle"))
    sheet.add(
        Put(
            "Yellow cells take other plans, names and true values, all about one parameter.",
            "note",
            12,
        )
    )
    page = _Page(sheet, subject)
    page.costs()
    page.curves()
    sheet.freeze("D5")
    sheet.protect()
    sheet.print_setup(landscape=True, area=f"A1:{_LETTERS[_FIRST_RATE + STEPS]}{sheet.next_row - 1}")
    paper.fixed_scale(sheet, 58)
    return sheet


class _Page:
    """The two tables and the chart of the sheet."""

    def __init__(self, sheet: Sheet, subject: Planned) -> None:
        self.sheet, self.subject, self.host = sheet, subject, sheet.book.host
        given = alternatives(subject)
        self.names: list[Value] = [name for name, _ in given] + [None] * (MOST - len(given))
        self.texts: list[Value] = [text for _, text in given] + [None] * (MOST - len(given))
        self.style = rows.rate_style(subject)
        self.plans = Terms((), [])

    def costs(self) -> None:
        """Write the plans with what they cost and risk at the claim and at the rate to catch."""
        sheet = self.sheet
        claim, (catch, *_) = marks(self.subject)[0], self.subject.own_catches
        sheet.skip()
        at = [
            sheet.add(None, Put(text, "label"), Put(value, f"input {self.style}"))
            for text, value in (("Claim's boundary", claim), ("Rate to catch", catch))
        ]
        near, far = (Terms((f"$C${row}",), value) for row, value in zip(at, (claim, catch), strict=True))
        sheet.skip()
        heads = (
            "No.",
            "Name",
            "Plan",
            "Rejects",
            "Items at the claim",
            "Items at the catch",
            "Size",
            "Power at the catch",
            "Beta at the catch",
            "Passes with 95 % at",
            "Passes with 10 % at",
            "Curve crosses plan 1 at",
        )
        top = sheet.add(*(Put(text, "heading") for text in heads), height=58)
        self.plans = column("$C", top + 1, self.texts)
        plans = self.plans
        columns = [
            self._ask("REGION", plans),
            self._ask("AVERAGE_SAMPLE", plans, near),
            self._ask("AVERAGE_SAMPLE", plans, far),
            self._ask("SIZE", plans),
            self._ask("POWER", plans, far),
            self._ask("BETA", plans, far),
            self._ask("RATE_FOR", plans, Terms(("5%",), 0.05)),
            self._ask("RATE_FOR", plans, Terms(("90%",), 0.9)),
        ]
        looks = (
            "cell",
            "result value",
            "result value",
            "result risk",
            "result power",
            "result power",
            f"result {self.style}",
            f"result {self.style}",
        )
        lives = [terms.lives(look) for terms, look in zip(columns, looks, strict=True)]
        crossings = self._crossings()
        for place in range(MOST):
            sheet.add(
                Put(place + 1, "index"),
                Put(self.names[place], "edit"),
                Put(self.texts[place], "edit"),
                *(cells[place] for cells in lives),
                crossings[place],
            )
        sheet.add(None, Put("Items: inspected on average, without stopping inside a sample.", "note", 2))
        sheet.add(
            None, Put("A plan of a large size is powerful because it rejects good lots too.", "note", 2)
        )

    def _ask(self, name: str, plans: Terms, *terms: Terms) -> Terms:
        return ask(self.host, name, plans, *terms, unless_blank=plans)

    def _crossings(self) -> list[Live]:
        """Return where each curve first crosses the first plan's; blank where it does not."""
        first = self.plans.text(0)
        lives = []
        for place in range(MOST):
            own = self.plans.text(place)
            found = (
                call("CROSSING", [self.texts[0], self.texts[place]]) if place and self.texts[place] else ""
            )
            found = found[0][0] if isinstance(found, list) else found
            shown = found if isinstance(found, float) else ""
            crossing = f"INDEX(SY_CROSSING({first},{own}),1,1)"
            text = f'=IF({own}="","",IF(ISNUMBER({crossing}),{crossing},""))'
            lives.append(Live(text, shown, f"result {self.style}"))
        return lives

    def curves(self) -> None:
        """Write the table of power, the best plan at each rate, and the chart."""
        sheet, parameter = self.sheet, self.subject.kind.parameters[0]
        rates = scale_of(self.subject, 1.5).values(STEPS)[: STEPS + 1]
        left, right = _LETTERS[_FIRST_RATE], _LETTERS[_FIRST_RATE + len(rates) - 1]
        sheet.skip()
        sheet.add(Put("Power by the true value", "section"))
        head = sheet.add(
            *(Put(text, "heading") for text in ("No.", "Name", "Plan")),
            *(Put(rate, f"input {self.style}") for rate in rates),
        )
        area = across(f"${left}${head}:${right}${head}", rates)
        power = self._ask("POWER", self.plans, area)
        first = sheet.next_row
        for place, array in enumerate(power.arrays("result power")):
            sheet.add(Put(place + 1, "index"), *self._copies(place), array)
        last = sheet.next_row - 1
        sheet.colour_scale(f"{left}{first}:{right}{last}")
        self._best(power, first, last)
        x = sheet.ref(f"{left}{head}", f"{right}{head}")
        curves = [
            Curve(sheet.ref(f"B{row}"), x, sheet.ref(f"{left}{row}", f"{right}{row}"))
            for row, text in zip(range(first, last + 1), self.texts, strict=True)
            if text
        ]
        sheet.skip()
        name = f"true {parameter.name}, {parameter.symbol}"
        axes = (
            rate_axis(name, rates[0], rates[-1], self.style == "rate"),
            Axis("power: chance of rejecting", 1.0),
        )
        chart = curve_chart("Power of the alternatives", *axes, curves, 42.0, 13.0)
        sheet.chart(chart, f"Power of {len(curves)} alternative plans by the {name}.")

    def _copies(self, place: int) -> list[Live]:
        row = self.plans.text(place).removeprefix("$C")
        pairs = (("$B", self.names[place], "result"), ("$C", self.texts[place], "cell"))
        return [
            Live(f'=IF({letters}{row}="","",{letters}{row})', value or "", look)
            for letters, value, look in pairs
        ]

    def _best(self, power: Terms, first: int, last: int) -> None:
        """Name the most powerful plan at each true value by its number; of equals the first."""
        cells = []
        for place, letters in enumerate(_LETTERS[_FIRST_RATE : _FIRST_RATE + len(power.cells[0])]):
            area = f"{letters}{first}:{letters}{last}"
            values = [row[place] for row in power.cells if isinstance(row[place], float)]
            cells.append(
                Live(f"=MATCH(MAX({area}),{area},0)", values.index(max(values)) + 1, "verdict count")
            )
        self.sheet.add(None, Put("Most powerful: plan No.", "label", 2), *cells)
