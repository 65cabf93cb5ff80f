"""The *Results log*: a row for each inspected lot, with its decision, evidence and running totals."""

from __future__ import annotations

from collections.abc import Sequence

from steelyard.workbooks.charts import Axis, Curve, curve_chart
from steelyard.workbooks.house import Book, Live, LiveArray, Piece, Put, Sheet, Value
from steelyard.workbooks.plans import Planned
from steelyard.workbooks.sheets import paper
from steelyard.workbooks.terms import Terms, ask, literal

TITLE = "Results log"
ROWS = 38
CONFIDENCE = 0.95

_WIDTHS = {
    **dict(zip("ABCDEFGH", (11.0, 16.0, 26.0, 54.0, 10.0, 10.0, 22.0, 10.0), strict=True)),
    **dict(zip("IJKLMNO", (12.0, 11.0, 11.0, 12.0, 12.0, 3.0, 8.0), strict=True)),
}
_HEADS = (
    *("Date", "Lot", "Characteristic", "Plan", "Inspected", "Found", "Decision", "P-value"),
    *("Upper limit for the rate", "Inspected so far", "Found so far", "Rate so far", "Upper limit so far"),
)


def add_results(book: Book, planned: Sequence[Planned]) -> Sheet | None:
    """Add the sheet for plans of defectives; nothing where there is none. Return it."""
    suiting = [one for one in planned if one.plan.kind == "binomial"]
    if not suiting:
        return None
    sheet = book.sheet(TITLE, _WIDTHS)
    sheet.add(Put("Results log", "title"))
    sheet.add(Put("One row for each inspected lot; the rest is computed.", "subtitle"))
    sheet.add(
        Put(
            "Fill in the yellow cells: date, lot, characteristic, its plan (see Register), count found.",
            "note",
            12,
        )
    )
    level = sheet.add(Put("Confidence of the limits", "label", 2), Put(CONFIDENCE, "input percent"))
    sheet.skip()
    log = _Log(sheet, suiting, f"$C${level}")
    log.write()
    log.draw()
    sheet.freeze(f"C{log.top + 1}")
    sheet.protect()
    sheet.print_setup(landscape=True, repeat=f"{log.top}:{log.top}", area=f"A1:M{sheet.next_row - 1}")
    paper.fixed_scale(sheet, 60)
    return sheet


class _Log:
    """The table and its chart."""

    def __init__(self, sheet: Sheet, planned: Sequence[Planned], level: str) -> None:
        self.sheet, self.host = sheet, sheet.book.host
        self.level = Terms((level,), CONFIDENCE)
        self.examples = [(planned[0], found) for found in (0, 1, 0)]
        self.top = 0

    def write(self) -> None:
        """Write the headings and the rows; three hold an example."""
        sheet = self.sheet
        self.top = sheet.add(*(Put(text, "heading") for text in _HEADS), height=44)
        first = self.top + 1
        plans = self._typed("D", [one.text for one, _ in self.examples])
        found = self._typed("F", [float(count) for _, count in self.examples])
        whole = Terms(tuple(f"F{row}:F{row}" for row in range(first, first + ROWS)), found.cells)
        observed = whole if self.host == "calc" else found
        decision = ask(self.host, "DECIDE", plans, observed, unless_blank=found)
        p_value = ask(self.host, "PVALUE", plans, observed, unless_blank=found)
        limit = ask(self.host, "LIMIT", plans, observed, literal("upper"), self.level, unless_blank=found)
        for place in range(ROWS):
            row = first + place
            parts = [
                terms.lives(look)[place]
                for terms, look in ((decision, "cell"), (p_value, "result power"), (limit, "result risk"))
            ]
            sheet.add(*self._inputs(place), *parts, *self._totals(row, place))
        sheet.flag(f"G{first}:G{first + ROWS - 1}", f'=ISNUMBER(SEARCH("fail",G{first}))')

    def _typed(self, letters: str, values: Sequence[object]) -> Terms:
        texts = tuple(f"{letters}{row}" for row in range(self.top + 1, self.top + 1 + ROWS))
        return Terms(texts, [[value] for value in values] + [[None]] * (ROWS - len(values)))

    def _inputs(self, place: int) -> list[Piece]:
        values: Sequence[Value] = (None,) * 6
        if place < len(self.examples):
            one, found = self.examples[place]
            values = ("example", f"Lot {place + 1}", one.request.characteristic, one.text, one.extent, found)
        looks = ("edit", "edit", "edit", "edit", "input count", "tick count")
        return [Put(value, look) for value, look in zip(values, looks, strict=True)]

    def _totals(self, row: int, place: int) -> list[Piece]:
        """Return the running totals of the row's characteristic, and the limit that they give."""
        first = self.top + 1
        same = f"$C${first}:$C{row}"
        inspected = f'=IF($F{row}="","",SUMIF({same},$C{row},$E${first}:$E{row}))'
        found = f'=IF($F{row}="","",SUMIF({same},$C{row},$F${first}:$F{row}))'
        rate = f'=IF($F{row}="","",K{row}/J{row})'
        limit = (
            f'=IF($F{row}="","",IF(K{row}>=J{row},1,BETA.INV({self.level.texts[0]},K{row}+1,J{row}-K{row})))'
        )
        shown: tuple[float | str, ...] = ("", "", "", "")
        if place < len(self.examples):
            shown = self._so_far(place)
        looks = ("native count", "native count", "native risk", "native risk")
        return [
            Live(text, value, look)
            for text, value, look in zip((inspected, found, rate, limit), shown, looks, strict=True)
        ]

    def _so_far(self, place: int) -> tuple[float, float, float, float]:
        name = self.examples[place][0].request.characteristic
        mine = [
            (one.extent, float(count))
            for one, count in self.examples[: place + 1]
            if one.request.characteristic == name
        ]
        items, found = (sum(column) for column in zip(*mine, strict=True))
        asked = ask(
            "excel",
            "LIMIT",
            literal(f"binomial | n {items:g} | claim p<=0.5 | reject x>={items:g}"),
            literal(found),
            literal("upper"),
            self.level,
        )
        return items, found, found / items, float(asked.cells[0][0])

    def draw(self) -> None:
        """Draw the rate found in each row with its upper limit."""
        sheet, first = self.sheet, self.top + 1
        last = first + ROWS - 1
        below = sheet.next_row
        sheet.next_row = self.top
        sheet.add(Put("row", "unit"), column="O")
        sheet.add(
            LiveArray(f"=ROW(A{first}:A{last})-{self.top}", [[float(i + 1)] for i in range(ROWS)], "unit"),
            column="O",
        )
        sheet.next_row = below + 1
        paper.break_here(sheet)
        sheet.skip()
        x = sheet.ref(f"O{first}", f"O{last}")
        curves = [
            Curve("Rate so far", x, sheet.ref(f"L{first}", f"L{last}"), "points"),
            Curve("Upper limit so far", x, sheet.ref(f"M{first}", f"M{last}")),
        ]
        axes = Axis("row of the log", ROWS, digits="0"), Axis("defect rate", digits="0%")
        chart = curve_chart("Rates with their upper limits", *axes, curves, 39.0, 13.0)
        sheet.chart(chart, "Rate of defectives so far and its upper confidence limit, by row of the log.")
