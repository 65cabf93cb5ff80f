"""A *Justification*: what a plan tests, at which risks and why, on two pages signed before sampling."""

from __future__ import annotations

from dataclasses import dataclass

from openpyxl.utils import get_column_letter

from steelyard.core import VERSION
from steelyard.workbooks.house import Book, Live, Put, Sheet, choice
from steelyard.workbooks.sheets import paper, rows
from steelyard.workbooks.sheets.curves import add_curves
from steelyard.workbooks.sheets.page import VALUES, WIDE, Page, told, wide
from steelyard.workbooks.sheets.register import Register
from steelyard.workbooks.sheets.scales import table_values
from steelyard.workbooks.terms import across, ask, literal

LAST = "I"

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
    page = _Justification(sheet, register, place)
    page.head()
    page.subject()
    page.claim_and_risks()
    page.rule()
    first_rate = page.performance()
    paper.break_here(sheet)
    page.native_check(first_rate)
    page.assumptions()
    page.cautions()
    page.alternatives()
    page.record(source)
    page.sign_off()
    sheet.protect()
    sheet.print_setup(area=f"A1:{LAST}{sheet.next_row - 1}")
    paper.fixed_scale(sheet, 83)
    return sheet


class _Justification(Page):
    """The sections of one sheet, in the order of the paper."""

    def head(self) -> None:
        """Write the title and the document's number and revision."""
        self.sheet.add(Put("Justification of a sampling plan", "title"))
        self.sheet.add(self.link("name", "subtitle", WIDE))
        self.sheet.add(
            Put("Document number", "label"), Put(None, "writing words", 2), Put("Revision", "label"),
            Put(None, "writing words", 2), Put("Date", "label"), Put(None, "writing date", 2), height=20,
        )  # fmt: skip

    def subject(self) -> None:
        """Write what is inspected and why."""
        self.section("1  What is inspected")
        lot = f"A finite lot of {self.planned.extra:,.0f} items" if rows.in_lots(self.planned) else None
        self.line("Characteristic", self.link("name", "text", VALUES))
        self.line("Judged by", self._measure())
        self.line("Requirement and source", self.link("reference", "text", VALUES))
        self.line("Effect of a failure", self.blank())
        self.line("Risk class, procedure", self.blank(self.planned.request.risk_class))
        self.line("Lot or population", self.blank(lot))
        self.line("How items are drawn", self.blank())

    def claim_and_risks(self) -> None:
        """Write the hypotheses and the risks of both errors."""
        self.section("2  Claim and risks")
        name = self.parameter.name[0].upper() + self.parameter.name[1:]
        self.line("Claim (null hypothesis)", self.sentence(2))
        alternatives = {side: f"{name} {text}." for side, text in _ALTERNATIVE.items()}
        self.line("Alternative", self.by_word("side", alternatives))
        self.line("What passing means", self.by_word("verdict", _PASSING))
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
            self.link("alpha", "result risk"), self.link("actual", "result risk"),
            self.typed("catch"), self.typed("second"),
            self.link("wanted", "result power"), self.link("power", "result power"), beta,
            self.link("short", "result power"),
        )  # fmt: skip
        self.line("Risks accepted by", self.blank())

    def rule(self) -> None:
        """Write the rule as the inspector reads it at the bench."""
        self.section("3  Rule at the bench")
        self.line("Sample", self.sentence(1))
        self.line("Decision", self.sentence(3))
        self.line("After a failed lot", Put(_AFTER, "text", VALUES))
        self.line("Plan", self.link("plan", "cell", VALUES))

    def performance(self) -> str:
        """Write the table and the curve; return the cell of the first true value."""
        self.section("4  What the plan does")
        sheet, rates = self.sheet, table_values(self.planned, VALUES)
        row = sheet.next_row
        spread = across(f"B{row}:{get_column_letter(1 + len(rates))}{row}", rates)
        sheet.add(
            Put(f"True {self.parameter.name}", "label"), *(Put(rate, f"input {self.style}") for rate in rates)
        )
        for label, name in (("Power: claim rejected", "POWER"), ("Chance to pass", "ACCEPTANCE")):
            sheet.add(Put(label, "label"), *ask(self.host, name, self.plan, spread).arrays("result power"))
        sheet.add(None, *(Put(text, "heading", 2) for text in ("95 %", "50 %", "10 %", "5 %")))
        passing = self.register.passing("p05", self.place)
        accepted = [
            self.link(key, f"result {rows.result_style(self.planned)}", 2) for key in ("p95", "p50", "p10")
        ]
        sheet.add(
            Put("Passes with this chance", "label"),
            *accepted,
            wide(passing, f"result {rows.result_style(self.planned)}", 2),
        )
        add_curves(sheet, self.register, self.place)
        return f"B{row}"

    def native_check(self, rate: str) -> None:
        """Write the power from the spreadsheet's own functions, and their formula for the rate in a cell."""
        self.section("5  Check by the spreadsheet's own functions")
        heads = ("Power by the add-in", "Power by native functions", "Verdict")
        self.sheet.add(None, *(Put(head, "heading", 2) for head in heads))
        looks = (("power", "result exact"), ("native", "native exact"), ("agrees", "verdict"))
        self.sheet.add(
            Put("At the rate to catch", "label"), *(self.link(key, look, 2) for key, look in looks)
        )
        native = ask(self.host, "NATIVE", self.plan, literal(rate))
        formula = f'=SUBSTITUTE({native.texts[0]},",",", ")'  # with blanks, at which the text can break
        shown = str(native.cells[0][0]).replace(",", ", ")
        self.line(f"Formula for {rate}", Live(formula, shown, "text", VALUES))

    def assumptions(self) -> None:
        """Write what must hold, each with a box to tick and room for the evidence."""
        self.section("6  Assumptions: tick each, and name the evidence")
        for text in (*self.planned.kind.grammar.wording.assumptions, *_GENERAL):
            self.sheet.add(Put(text, "text", 5), Put("☐", "tick", check=_BOX), Put(None, "writing words", 3))

    def cautions(self) -> None:
        """Write what the plan does not show."""
        self.section("7  Cautions")
        alpha, size = (self.register.term(key, self.place) for key in ("alpha", "actual"))
        self.sheet.add(self._still_passing())
        self.sheet.add(told("Nominal alpha ", alpha, " %, actual size ", size, " %."))
        for caution in CAUTIONS:
            self.sheet.add(Put(caution, "text", WIDE))

    def alternatives(self) -> None:
        """Leave room for what was considered and rejected."""
        self.section("8  Alternatives considered, and why they were not taken")
        for _ in range(2):
            self.sheet.add(Put(None, "writing words", WIDE), height=20)

    def record(self, source: Source) -> None:
        """Write where the numbers come from."""
        self.section("9  Record")
        version = Live(
            '=IFERROR("Steelyard "&SY_VERSION(),"not connected to Steelyard")',
            f"Steelyard {VERSION}",
            "text",
            VALUES,
        )
        self.line("Computed by", version)
        self.line("Request list", Put(f"{source.name}, row {self.planned.request.row}", "text", VALUES))
        self.line("SHA-256 of the list", Put(source.digest, "text", VALUES))

    def sign_off(self) -> None:
        """Leave room for revisions and signatures."""
        self.section("10  Revisions and signatures, before any sample is taken")
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

    def _measure(self) -> Put | Live:
        """Return what is counted or measured, and in which unit."""
        title, unit = self.planned.kind.grammar.wording.title, self.planned.request.unit
        if unit is None:
            return Put(title, "text", VALUES)
        formula = f'="{title}; unit: "&{self.register.term("unit", self.place).texts[0]}'
        return Live(formula, f"{title}; unit: {unit}", "text", VALUES)

    def _still_passing(self) -> Live:
        """Return the caution that a lot which should fail can pass."""
        start = "Passing does not show that the lot is free of defects"
        if self.planned.plan.verdict == "pass":  # what must not pass is the claim's own rate
            size = self.register.term("actual", self.place)
            return told(f"{start}; where the claim is just true it passes with probability ", size, " %.")
        catch = self.register.term("catch_own", self.place)
        if catch.values()[0] is None:
            return told(f"{start}.")
        passing = ask(self.host, "ACCEPTANCE", self.plan, catch)
        return told(f"{start}; at the rate to catch it still passes with probability ", passing, " %.")
