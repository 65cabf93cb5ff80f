"""A *Justification*: what a plan tests, at which risks and why, on two pages signed before sampling."""

from __future__ import annotations

from dataclasses import dataclass

from openpyxl.utils import get_column_letter

from steelyard.core import VERSION
from steelyard.workbooks.house import Book, Live, Put, Sheet, choice
from steelyard.workbooks.sheets import paper, rows
from steelyard.workbooks.sheets.curves import add_curves
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.sheets.scales import table_values
from steelyard.workbooks.terms import Terms, across, ask, literal

LAST = "I"
WIDE = 9  # columns of a page
VALUES = WIDE - 1  # columns right of the labels

_WIDTHS = {"A": 23.0} | dict.fromkeys("BCDEFGHI", 9.8) | {"J": 3.0} | dict.fromkeys("KLM", 11.0)
_BOX = choice(("☐", "☑"), "Tick", "Choose ☑ when the evidence is at hand.")
_ALTERNATIVE = {
    "above": "above what is claimed",
    "below": "below what is claimed",
    "either": "not as claimed",
}
_PASSING = {
    "fail": "The sample does not contradict the claim. It proves neither the claim nor a faultless lot.",
    "pass": "The sample contradicts the claim; while that is true, it does so with the actual size at most.",
}
_AFTER = "The procedure for failed lots applies. No second sample is taken: the plan has only one."
_GENERAL = (
    "The process is stable over what the claim is about.",
    "The inspection method is validated for this characteristic.",
)
CAUTIONS = (
    "Not rejecting a claim does not prove it.",
    "The risks hold only for random selection and independent items.",
    "Fixed before sampling: changing the size or adding samples afterwards voids these risks.",
    "Where a failure can hurt someone, codes, contracts and a qualified person decide.",
)


@dataclass(frozen=True, slots=True)
class Source:
    """Where the requests came from: the file's name and its SHA-256."""

    name: str = "none"
    digest: str = "none"


def add_justification(book: Book, register: Register, place: int, source: Source) -> Sheet:
    """Add the sheet of one characteristic (its place in the register) and return it."""
    planned = register.planned[place]
    sheet = book.sheet(book.free_title(f"{planned.number} {planned.request.characteristic}"), _WIDTHS)
    page = _Page(sheet, register, place)
    page.head()
    page.subject()
    page.claim_and_risks()
    page.rule()
    page.performance()
    paper.break_here(sheet)
    page.native_check()
    page.assumptions()
    page.cautions()
    page.alternatives()
    page.record(source)
    page.sign_off()
    sheet.protect()
    sheet.print_setup(area=f"A1:{LAST}{sheet.next_row - 1}")
    paper.fixed_scale(sheet, 85)
    return sheet


class _Page:
    """The sections of one sheet, in the order of the paper."""

    def __init__(self, sheet: Sheet, register: Register, place: int) -> None:
        self.sheet, self.register, self.place = sheet, register, place
        self.planned = register.planned[place]
        self.host = sheet.book.host
        self.plan = register.term("plan", place)
        self.size = register.term("actual", place)
        self.first_rate = ""
        self.explained = ask(self.host, "EXPLAIN", self.plan)
        self.style = rows.rate_style(self.planned)
        self.parameter = self.planned.kind.parameters[0]

    def head(self) -> None:
        """Write the title and the document's number and revision."""
        self.sheet.add(Put("Justification of a sampling plan", "title"))
        self.sheet.add(self._link("name", "subtitle", WIDE))
        self.sheet.add(
            Put("Document number", "label"), Put(None, "writing words", 2), Put("Revision", "label"),
            Put(None, "writing words", 2), Put("Date", "label"), Put(None, "writing date", 2), height=20,
        )  # fmt: skip

    def subject(self) -> None:
        """Write what is inspected and why."""
        self._section("1  What is inspected")
        lot = f"A finite lot of {self.planned.extra:,.0f} items" if rows.in_lots(self.planned) else None
        self._line("Characteristic", self._link("name", "text", VALUES))
        self._line("Judged by", self._measure())
        self._line("Requirement and source", self._link("reference", "text", VALUES))
        self._line("Effect of a failure", self._blank())
        self._line("Risk class, procedure", self._blank(self.planned.request.risk_class))
        self._line("Lot or population", self._blank(lot))
        self._line("How items are drawn", self._blank())

    def claim_and_risks(self) -> None:
        """Write the hypotheses and the risks of both errors."""
        self._section("2  Claim and risks")
        name = self.parameter.name[0].upper() + self.parameter.name[1:]
        self._line("Claim (null hypothesis)", self._sentence(2))
        alternatives = {side: f"{name} {text}." for side, text in _ALTERNATIVE.items()}
        self._line("Alternative", self._by_word("side", alternatives))
        self._line("What passing means", self._by_word("verdict", _PASSING))
        heads = (
            "Nominal alpha",
            "Actual size",
            "Catch",
            "and catch",
            "Power wanted",
            "Power at catch",
            "Beta at catch",
            "Shortfall",
        )
        self.sheet.add(None, *(Put(head, "heading") for head in heads))
        power = self.register.term("power", self.place)
        value = power.values()[0]
        beta = Live(
            f'=IF({power.texts[0]}="","",1-{power.texts[0]})',
            None if value is None else 1 - value,
            "result power",
        )
        self.sheet.add(
            Put("Risks", "label"),
            self._link("alpha", "result risk"), self._link("actual", "result risk"),
            self._link("catch", self._typed("catch")), self._link("second", self._typed("second")),
            self._link("wanted", "result power"), self._link("power", "result power"), beta,
            self._link("short", "result power"),
        )  # fmt: skip
        self._line("Risks accepted by", self._blank())

    def rule(self) -> None:
        """Write the rule as the inspector reads it at the bench."""
        self._section("3  Rule at the bench")
        self._line("Sample", self._sentence(1))
        self._line("Decision", self._sentence(3))
        self._line("After a failed lot", Put(_AFTER, "text", VALUES))
        self._line("Plan", self._link("plan", "cell", VALUES))

    def performance(self) -> None:
        """Write the table and the curve."""
        self._section("4  What the plan does")
        sheet, rates = self.sheet, table_values(self.planned, VALUES)
        self.first_rate = f"B{sheet.next_row}"
        spread = across(f"{self.first_rate}:{get_column_letter(1 + len(rates))}{sheet.next_row}", rates)
        sheet.add(
            Put(f"True {self.parameter.name}", "label"), *(Put(rate, f"input {self.style}") for rate in rates)
        )
        for label, name in (("Power: claim rejected", "POWER"), ("Chance to pass", "ACCEPTANCE")):
            sheet.add(Put(label, "label"), *ask(self.host, name, self.plan, spread).arrays("result power"))
        sheet.add(None, *(Put(text, "heading", 2) for text in ("95 %", "50 %", "10 %", "5 %")))
        passing = self.register.passing("p05", self.place)
        accepted = [
            self._link(key, f"result {rows.result_style(self.planned)}", 2) for key in ("p95", "p50", "p10")
        ]
        sheet.add(
            Put("Passes with this chance", "label"),
            *accepted,
            _wide(passing, f"result {rows.result_style(self.planned)}", 2),
        )
        add_curves(sheet, self.register, self.place)

    def native_check(self) -> None:
        """Write the same number from the spreadsheet's own functions."""
        self._section("5  Check by the spreadsheet's own functions")
        heads = ("Power by the add-in", "Power by native functions", "Verdict")
        self.sheet.add(None, *(Put(head, "heading", 2) for head in heads))
        looks = (("power", "result exact"), ("native", "native exact"), ("agrees", "verdict"))
        self.sheet.add(
            Put("At the rate to catch", "label"), *(self._link(key, look, 2) for key, look in looks)
        )
        native = ask(self.host, "NATIVE", self.plan, literal(self.first_rate))
        formula = f'=SUBSTITUTE({native.texts[0]},",",", ")'  # with blanks, at which the text can break
        shown = str(native.cells[0][0]).replace(",", ", ")
        self._line(f"Formula for {self.first_rate}", Live(formula, shown, "text", VALUES))

    def assumptions(self) -> None:
        """Write what must hold, each with a box to tick and room for the evidence."""
        self._section("6  Assumptions: tick each, and name the evidence")
        for text in (*self.planned.kind.grammar.wording.assumptions, *_GENERAL):
            self.sheet.add(Put(text, "text", 5), Put("☐", "tick", check=_BOX), Put(None, "writing words", 3))

    def cautions(self) -> None:
        """Write what the plan does not show."""
        self._section("7  Cautions")
        alpha = self.register.term("alpha", self.place)
        self.sheet.add(self._still_passing())
        self.sheet.add(_sentence("Nominal alpha ", alpha, " %, actual size ", self.size, " %."))
        for caution in CAUTIONS:
            self.sheet.add(Put(caution, "text", WIDE))

    def alternatives(self) -> None:
        """Leave room for what was considered and rejected."""
        self._section("8  Alternatives considered, and why they were not taken")
        for _ in range(2):
            self.sheet.add(Put(None, "writing words", WIDE), height=20)

    def record(self, source: Source) -> None:
        """Write where the numbers come from."""
        self._section("9  Record")
        version = Live(
            '=IFERROR("Steelyard "&SY_VERSION(),"not connected to Steelyard")',
            f"Steelyard {VERSION}",
            "text",
            VALUES,
        )
        self._line("Computed by", version)
        self._line("Request list", Put(f"{source.name}, row {self.planned.request.row}", "text", VALUES))
        self._line("SHA-256 of the list", Put(source.digest, "text", VALUES))

    def sign_off(self) -> None:
        """Leave room for revisions and signatures."""
        self._section("10  Revisions and signatures, before any sample is taken")
        self.sheet.add(Put("Revision", "heading"), Put("Date", "heading", 2), Put("Change", "heading", 6))
        for _ in range(2):
            self.sheet.add(
                Put(None, "writing words"),
                Put(None, "writing date", 2),
                Put(None, "writing words", 6),
                height=20,
            )
        self.sheet.skip()
        self.sheet.add(
            Put("Role", "heading"),
            Put("Name", "heading", 3),
            Put("Date", "heading", 2),
            Put("Signature", "heading", 3),
        )
        for role in ("Author", "Reviewer", "Approver"):
            self.sheet.add(
                Put(role, "writing words"), Put(None, "writing words", 3), Put(None, "writing date", 2),
                Put(None, "writing words", 3), height=26,
            )  # fmt: skip

    # Parts of sections

    def _section(self, text: str) -> None:
        self.sheet.skip()
        self.sheet.add(Put(text, "section"))

    def _line(self, label: str, piece: Put | Live) -> None:
        self.sheet.add(Put(label, "label"), piece)

    def _blank(self, text: str | None = None) -> Put:
        return Put(text, "writing words", VALUES)

    def _link(self, key: str, style: str, span: int = 1) -> Live:
        """Return a cell of the register, shown here too."""
        term = self.register.term(key, self.place)
        text, value = term.texts[0], term.values()[0]
        return Live(f"={text}" if value is not None else f'=IF({text}="","",{text})', value, style, span)

    def _measure(self) -> Put | Live:
        """Return what is counted or measured, and in which unit."""
        title, unit = self.planned.kind.grammar.wording.title, self.planned.request.unit
        if unit is None:
            return Put(title, "text", VALUES)
        formula = f'="{title}; unit: "&{self.register.term("unit", self.place).texts[0]}'
        return Live(formula, f"{title}; unit: {unit}", "text", VALUES)

    def _typed(self, key: str) -> str:
        return f"result {rows.typed_style(self.planned, self.register.value(key, self.place))}"

    def _sentence(self, number: int) -> Live:
        """Return one of the sentences of SY_EXPLAIN."""
        text = f"=INDEX({self.explained.texts[0]},{number},1)"
        return Live(text, self.explained.cells[number - 1][0], "text", VALUES)

    def _by_word(self, key: str, texts: dict[str, str]) -> Live:
        """Return the text that belongs to the word in a cell of the register."""
        term = self.register.term(key, self.place)
        *others, last = texts.values()
        formula = literal(last).texts[0]
        for word, text in zip(texts, others, strict=False):
            formula = f'IF({term.texts[0]}="{word}",{literal(text).texts[0]},{formula})'
        return Live(f"={formula}", texts[term.values()[0]], "text", VALUES)

    def _still_passing(self) -> Live:
        """Return the caution that a lot which should fail can pass."""
        start = "Passing does not show that the lot is free of defects"
        demonstration = self.planned.plan.verdict == "pass"
        if demonstration:  # what must not pass is the claim's own rate
            return _sentence(
                f"{start}; where the claim is just true it passes with probability ", self.size, " %."
            )
        catch = self.register.term("catch_own", self.place)
        if catch.values()[0] is None:
            return _sentence(f"{start}.")
        passing = ask(self.host, "ACCEPTANCE", self.plan, catch)
        return _sentence(f"{start}; at the rate to catch it still passes with probability ", passing, " %.")


def _wide(terms: Terms, style: str, span: int) -> Live:
    return Live(f"={terms.texts[0]}", terms.cells[0][0], style, span)


def _sentence(*parts: str | Terms) -> Live:
    """Return a line of words and of probabilities in percent."""
    texts, shown = [], []
    for part in parts:
        if isinstance(part, Terms):
            texts.append(f"ROUND(100*{part.texts[0]},4)")
            shown.append(f"{round(100 * part.cells[0][0], 4):g}")
        else:
            texts.append(literal(part).texts[0])
            shown.append(part)
    return Live(f"={'&'.join(texts)}", "".join(shown), "text", WIDE)
