"""The *Sample size*: for one requirement, size and power against the number of items, saw teeth and all."""

from __future__ import annotations

from collections.abc import Sequence

from steelyard.addin import CATALOGUE
from steelyard.workbooks.charts import Axis, Curve, Role, curve_chart
from steelyard.workbooks.house import Book, Live, Piece, Put, Sheet, Value, between, choice
from steelyard.workbooks.plans import Planned
from steelyard.workbooks.sheets.comparison import subject_of
from steelyard.workbooks.sheets.scales import marks
from steelyard.workbooks.terms import Terms, ask, column, literal

TITLE = "Sample size"
ROWS = 72

_WIDTHS = {"A": 12.0, "B": 58.0, "C": 13.0, "D": 11.0, "E": 11.0, "F": 11.0, "G": 3.0, "H": 11.0, "I": 11.0}
_ROLES: tuple[Role, Role] = ("claim", "catch")
_INPUTS = ("Claim", "Alpha", "Catch", "Power wanted", "Side", "First n in the table", "Step")


def add_sizes(book: Book, planned: Sequence[Planned]) -> Sheet | None:
    """Add the sheet for the first characteristic that suits, or nothing; return it."""
    subject = subject_of(planned)
    if subject is None:
        return None
    sheet = book.sheet(TITLE, _WIDTHS)
    sheet.add(Put("Sample size", "title"))
    sheet.add(Put(f"Requirement of: {subject.request.characteristic}", "subtitle"))
    sheet.add(
        Put(
            "Edit the yellow cells; table and chart follow. Counts of defectives, tests on one side.",
            "note",
            6,
        )
    )
    sheet.skip()
    page = _Page(sheet, subject)
    page.answers()
    page.table()
    sheet.protect()
    sheet.print_setup(area=f"A1:F{sheet.next_row - 1}", repeat=f"{page.head}:{page.head}")
    return sheet


class _Page:
    """Inputs, the two sizes, the chart and the table."""

    def __init__(self, sheet: Sheet, subject: Planned) -> None:
        self.sheet, self.host, self.head = sheet, sheet.book.host, 0
        claim, catch = marks(subject)[0], subject.own_catches[0]
        power = float(subject.request.power or 0.9)
        risks = (claim, subject.alpha, catch, power)
        lasting = _size(*risks, "lasting")
        step = max(1, -(-lasting * 5 // (4 * ROWS)))
        start = step
        values: list[Value] = [*risks, "above", start, step]
        rate = between(0.0, 1.0)
        checks = (
            rate,
            rate,
            rate,
            rate,
            choice(("above", "below")),
            between(1, 1e6, whole=True),
            between(1, 1e5, whole=True),
        )
        looks = ("rate", "rate", "rate", "rate", "", "count", "count")
        self.at: list[Terms] = []
        for text, value, look, check in zip(_INPUTS, values, looks, checks, strict=True):
            row = sheet.add(Put(text, "label", 2), Put(value, f"input {look}".strip(), check=check))
            self.at.append(Terms((f"$C${row}",), value))

    def answers(self) -> None:
        """Write the first and the lasting smallest plan."""
        self.sheet.skip()
        self.sheet.add(*(Put(text, "heading") for text in ("Smallest", "Plan", "Items", "Size", "Power")))
        claim, alpha, catch, power, side, *_ = self.at
        self.sizes = []
        for order in ("first", "lasting"):
            row = self.sheet.next_row
            plan = ask(
                self.host, "SMALLEST", literal("binomial"), claim, alpha, catch, power, side, literal(order)
            )
            own = column("$B", row, plan.values())
            items = ask(self.host, "FIELD", own, literal("n"))
            size, reached = ask(self.host, "SIZE", own), ask(self.host, "POWER", own, catch)
            parts = (plan, items, size, reached)
            looks = ("cell", "result count", "result risk", "result power")
            cells = [terms.lives(look)[0] for terms, look in zip(parts, looks, strict=True)]
            self.sheet.add(Put(order, "label"), *cells)
            self.sizes.append((row, items.cells[0][0]))
        self.sheet.add(
            Put(
                "first: the least size that reaches the power. lasting: from there on it never falls short.",
                "note",
                6,
            ),
            height=26,
        )

    def table(self) -> None:
        """Write size and power against n, and draw them."""
        sheet = self.sheet
        chart_row = sheet.next_row + 1
        sheet.skip(26)
        heads = ("Items n", "Plan", "Reject from", "Size", "Power", "Reaches")
        self.head = sheet.add(*(Put(text, "heading") for text in heads))
        first = self.head + 1
        claim, alpha, catch, power, side, start, step = self.at
        sizes = [start.cells + place * step.cells for place in range(ROWS)]
        n = column("$A", first, sizes)
        plans = ask(self.host, "BINOMIAL", n, claim, alpha, side)
        own = column("$B", first, plans.values())
        parts = [plans.lives("cell"), ask(self.host, "CRITICAL", own).lives("result count")]
        size, reached = ask(self.host, "SIZE", own), ask(self.host, "POWER", own, catch)
        parts += [size.lives("result risk"), reached.lives("result power")]
        for place, cells in enumerate(zip(*parts, strict=True)):
            row = first + place
            enough = reached.values()[place]
            good = isinstance(enough, float) and enough >= power.cells
            sheet.add(
                Live(f"={start.texts[0]}+{place}*{step.texts[0]}", sizes[place], "index count"),
                *cells,
                Live(
                    f'=IF(ISNUMBER(E{row}),IF(E{row}>={power.texts[0]},"yes","no"),"no")',
                    "yes" if good else "no",
                    "verdict",
                ),
            )
        last = sheet.next_row - 1
        self._draw(chart_row, first, last, sizes)

    def _draw(self, row: int, first: int, last: int, sizes: Sequence[float]) -> None:
        """Draw size and power; the ends of the marking lines stand right of what is printed."""
        sheet, alpha, power = self.sheet, self.at[1], self.at[3]
        below = sheet.next_row
        sheet.next_row = self.head
        sheet.add(Put("Lines", "unit"), column="H")
        lines: list[Curve] = []
        for name, role, (answer, value) in zip(
            ("First size", "Lasting size"), _ROLES, self.sizes, strict=True
        ):
            upright = [(Live(f"=$C${answer}", value, "unit"), Put(end, "unit")) for end in (0, 1)]
            lines.append(self._line(name, role, upright))
        for name, level in (("Power wanted", power), ("Alpha", alpha)):
            flat = [
                (Live(f"=$A${at}", size, "unit"), Live(f"={level.texts[0]}", level.cells, "unit"))
                for at, size in ((first, sizes[0]), (last, sizes[-1]))
            ]
            lines.append(self._line(name, "target", flat))
        sheet.next_row = below
        x = sheet.ref(f"A{first}", f"A{last}")
        curves = [
            Curve("Power at the catch", x, sheet.ref(f"E{first}", f"E{last}")),
            Curve("Actual size", x, sheet.ref(f"D{first}", f"D{last}")),
            *lines,
        ]
        axes = Axis("items inspected, n", digits="0"), Axis("probability", 1.0)
        chart = curve_chart("Size and power against the number of items", *axes, curves, 21.0, 10.8)
        sheet.chart(chart, "Size and power move in saw teeth as the number of items grows.", f"A{row}")

    def _line(self, name: str, role: Role, ends: Sequence[tuple[Piece, Piece]]) -> Curve:
        rows = [self.sheet.add(*pair, column="H") for pair in ends]
        across, up = (self.sheet.ref(f"{letters}{rows[0]}", f"{letters}{rows[1]}") for letters in "HI")
        return Curve(name, across, up, role)


def _size(claim: float, alpha: float, catch: float, power: float, order: str) -> int:
    plan = CATALOGUE["SY_SMALLEST"].function("binomial", claim, alpha, catch, power, "above", order)
    return int(CATALOGUE["SY_FIELD"].function(plan, "n"))
