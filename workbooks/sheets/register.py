"""The *Register*: a row for each characteristic, its request on the left, its plan and risks on the right."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from openpyxl.utils import get_column_letter

from steelyard.core.plan import SIDES, SPLITS, VERDICTS
from steelyard.workbooks import native
from steelyard.workbooks.house import Book, Check, Piece, Put, Sheet, between, choice
from steelyard.workbooks.plans import Planned
from steelyard.workbooks.sheets import answers, paper, rows
from steelyard.workbooks.sheets.answers import DIFFERS, NONE
from steelyard.workbooks.terms import Terms, ask, column, literal, literals

TITLE = "Register"
FIRST = 7
"""The row of the first characteristic."""

ALLOWED = 1e-9
"""Relative difference from native functions that is allowed."""


@dataclass(frozen=True, slots=True)
class Head:
    """A column: its key, heading and width, and what stands above the first heading of a group."""

    key: str
    text: str
    width: float
    group: str = ""


HEADS = (
    Head("number", "No.", 5),
    Head("name", "Characteristic", 27),
    Head("kind", "Kind", 14.5, "Request"),
    Head("unit", "Unit", 20),
    Head("claim", "Claim", 9),
    Head("side", "Side", 7.5),
    Head("alpha", "Alpha", 7.5),
    Head("catch", "Catch", 9),
    Head("second", "and catch", 9),
    Head("wanted", "Power wanted", 8.5),
    Head("extra", "Lot, or sigma", 8),
    Head("fixed", "Size, if fixed", 8.5),
    Head("verdict", "Verdict on rejecting", 10),
    Head("split", "Split", 8.5),
    Head("class", "Risk class", 9),
    Head("reference", "Reference", 20),
    Head("note", "Note", 32),
    Head("plan", "Plan", 60, "Plan and risks"),
    Head("size", "Sample size", 9),
    Head("low", "Reject up to", 8.5),
    Head("high", "Reject from", 8.5),
    Head("actual", "Actual size", 9.5),
    Head("power", "Power at catch", 9),
    Head("short", "Shortfall of power", 9.5),
    Head("p95", "95 %", 10, "True value passing with"),
    Head("p50", "50 %", 10),
    Head("p10", "10 %", 10),
    Head("native", "Power by native functions", 11, "Checks"),
    Head("agrees", "Native check", 9),
    Head("check", "Remark on the plan", 32),
    Head("catch_own", "Catch used", 10, "In the plan's unit"),
    Head("second_own", "and catch used", 10),
)
PLACE = {head.key: get_column_letter(number) for number, head in enumerate(HEADS, 1)}
REQUESTED = [head.key for head in HEADS].index("plan")  # columns of the request

_CHANCE = between(1e-12, 1 - 1e-12, "Probability", "Between 0 and 1: type 5% or 0.05.", blank=True)
_SIZE = between(
    1e-9, 1e9, "Sample size", "Items or units to inspect. Empty: the smallest plan is sought.", blank=True
)
_NOTES = (
    "Yellow cells may be edited; what stands right of them follows.",
    "Where the side is either, the true values that pass with 95, 50 and 10 % are those above the claim;",
    "in a lot they are the first whole numbers that pass with that chance or less.",
)


class Register:
    """The sheet and its columns, for the other sheets to refer to.

    Parameters
    ----------
    book : Book
        Gets the sheet.
    planned : sequence of Planned
        One for each row.
    """

    def __init__(self, book: Book, planned: Sequence[Planned]) -> None:
        self.book, self.planned = book, planned
        self._terms: dict[str, Terms] = {}
        self._pieces: dict[str, Sequence[Piece]] = {}
        self._write_request()
        self._write_plan()
        self._write_risks()
        self._write_checks()
        self.sheet = self._lay_out()

    def term(self, key: str, place: int) -> Terms:
        """Return the cell of one characteristic, counted from 0, as the other sheets refer to it."""
        return column(f"${PLACE[key]}$", FIRST + place, [self.value(key, place)], TITLE)

    def value(self, key: str, place: int) -> Any:
        """Return what that cell shows."""
        return self._terms[key].cells[place][0]

    def column(self, key: str) -> Terms:
        """Return the cells of all characteristics, likewise."""
        return column(f"${PLACE[key]}$", FIRST, self.values(key), TITLE)

    def values(self, key: str) -> list[Any]:
        """Return what a column shows."""
        return self._terms[key].values()

    def passing(self, chance: str, place: int) -> Terms:
        """Return the true value at which one plan passes with a chance, ``"p95"`` to ``"p05"``."""
        plan, verdict, side = (self.term(key, place) for key in ("plan", "verdict", "side"))
        return answers.passing(self.book.host, chance, plan, verdict, side)

    def native(self, place: int, rate: str) -> str:
        """Return the native formula of one plan's power at the rate in a cell of another sheet."""
        at = {key: f"{TITLE}!${PLACE[key]}${FIRST + place}" for key in ("low", "high", "size", "extra")}
        return rows.native_formula(self.planned[place], at, rate)

    def _input(
        self, key: str, values: Sequence[Any], styles: str | Sequence[str], check: Check | None = None
    ) -> None:
        each = [styles] * len(values) if isinstance(styles, str) else styles
        self._terms[key] = column(PLACE[key], FIRST, values)
        self._pieces[key] = [
            Put(value, style, check=check) for value, style in zip(values, each, strict=True)
        ]

    def _live(self, key: str, terms: Terms, styles: str | Sequence[str] = "result") -> Terms:
        self._pieces[key] = terms.lives(styles)
        self._terms[key] = column(PLACE[key], FIRST, terms.values())
        return self._terms[key]

    def _each(self, value: Callable[[Planned], Any]) -> list[Any]:
        return [value(planned) for planned in self.planned]

    def _at(self, place: int) -> dict[str, str]:
        return {key: f"{letters}{FIRST + place}" for key, letters in PLACE.items()}

    def _write_request(self) -> None:
        pairs = self._each(lambda planned: (*planned.catches, None, None)[:2])
        first, second = ([pair[number] for pair in pairs] for number in (0, 1))
        self._input("number", self._each(lambda planned: planned.number), "index")
        self._input("name", self._each(lambda planned: planned.request.characteristic), "entry words")
        self._input("kind", self._each(lambda planned: planned.request.kind), "result")
        self._input("unit", self._each(_unit), "entry words")
        self._input(
            "claim",
            self._each(lambda planned: planned.claim),
            self._rate_inputs(self._each(lambda p: p.claim)),
        )
        self._input("side", self._each(lambda planned: planned.side), "pick", choice(tuple(SIDES.values())))
        self._input("alpha", self._each(lambda planned: planned.alpha), "input rate", _CHANCE)
        self._input("catch", first, self._rate_inputs(first))
        styles = self._rate_inputs(second)
        looks = ["result" if rate is None else style for rate, style in zip(second, styles, strict=True)]
        self._input("second", second, looks)
        self._input("wanted", self._each(lambda planned: planned.request.power), "input rate", _CHANCE)
        self._input("extra", self._each(lambda planned: planned.extra), self._each(_extra_style))
        self._input("fixed", self._each(lambda planned: planned.request.n), "input number", _SIZE)
        self._input("verdict", self._each(lambda planned: planned.plan.verdict), "pick", choice(VERDICTS))
        self._input("split", self._each(lambda planned: planned.plan.split), "pick", choice(SPLITS))
        self._input("class", self._each(lambda planned: planned.request.risk_class), "entry words")
        self._input("reference", self._each(lambda planned: planned.request.reference), "entry words")
        self._input("note", self._each(lambda planned: planned.request.note), "entry words")

    def _rate_inputs(self, values: Sequence[Any]) -> list[str]:
        return [
            f"input {rows.typed_style(planned, value)}"
            for planned, value in zip(self.planned, values, strict=True)
        ]

    def _write_plan(self) -> None:
        host, every = self.book.host, range(len(self.planned))
        texts = tuple(rows.plan_formula(self.planned[place], self._at(place), host) for place in every)
        plans = self._live("plan", Terms(texts, [[planned.text] for planned in self.planned]), "cell")
        words = literals(self._each(lambda planned: planned.kind.grammar.extent))
        self._live("size", ask(host, "FIELD", plans, words), "result number")
        for key, end in (("low", "lower"), ("high", "upper")):
            counts = answers.critical(host, plans, self._terms["side"], end)
            whole = [not isinstance(value, float) or value.is_integer() for value in counts.values()]
            self._live(key, counts, ["index count" if count else "index value" for count in whole])

    def _write_risks(self) -> None:
        host, plans = self.book.host, self._terms["plan"]
        styles = self._each(lambda planned: f"result {rows.result_style(planned)}")
        self._live("actual", ask(host, "SIZE", plans), "result risk")
        for number, key in enumerate(("catch", "second")):
            self._live(f"{key}_own", self._own_catches(number, key), styles)
        powers = [
            ask(host, "POWER", plans, self._terms[f"{key}_own"], unless_blank=self._terms[key])
            for key in ("catch", "second")
        ]
        power = self._live("power", answers.least(*powers), "result power")
        self._live(
            "short", answers.shortfall(power, self._terms["wanted"], self._terms["fixed"]), "result power"
        )
        for key in ("p95", "p50", "p10"):
            passing = answers.passing(host, key, plans, self._terms["verdict"], self._terms["side"])
            self._live(key, passing, styles)

    def _own_catches(self, number: int, key: str) -> Terms:
        texts, cells = [], []
        for place, planned in enumerate(self.planned):
            at = self._at(place)
            texts.append(rows.own_catch_formula(planned, number, at[key], at))
            cells.append([(*planned.own_catches, None, None)[number]])
        return Terms(tuple(texts), cells)

    def _write_checks(self) -> None:
        plans, rates = [one.plan for one in self.planned], [one.own_catches for one in self.planned]
        texts, cells = [], []
        for place, values in enumerate(native.power_values(plans, rates)):
            texts.append(self._least_natively(place))
            known = self.planned[place].native
            cells.append([min(values, default=None) if known else NONE])
        natively = self._live("native", Terms(tuple(texts), cells), "native power")
        self._live("agrees", answers.agreement(self._terms["power"], natively, ALLOWED), "verdict")
        self._live("check", ask(self.book.host, "CHECK", self._terms["plan"]), "cell")

    def _least_natively(self, place: int) -> str:
        """Return the native formula at the rate to catch; with two of them, of the lesser power."""
        planned, at = self.planned[place], self._at(place)
        keys = ("catch_own", "second_own")[: max(1, len(planned.catches))]
        formulas = [rows.native_formula(planned, at, at[key]) for key in keys]
        if not formulas[0]:
            return literal(NONE).texts[0]
        least = formulas[0] if len(formulas) == 1 else f"MIN({','.join(formulas)})"
        return f'IF({at["catch_own"]}="","",{least})'

    def _lay_out(self) -> Sheet:
        sheet = self.book.sheet(TITLE, {PLACE[head.key]: head.width for head in HEADS})
        sheet.add(Put("Register", "title"))
        sheet.add(
            None,
            None,
            Put("What was asked for, the plan that answers it, and what the plan does.", "subtitle"),
        )
        sheet.add(None, None, Put(" ".join(_NOTES), "note", REQUESTED - 2))
        sheet.skip()
        sheet.add(*(Put(head.group, "section") if head.group else None for head in HEADS))
        sheet.add(*(Put(head.text, "heading") for head in HEADS))
        sheet.rows([self._pieces[head.key][place] for head in HEADS] for place in range(len(self.planned)))
        last, check = sheet.next_row - 1, PLACE["check"]
        sheet.freeze(f"{PLACE['kind']}{FIRST}")
        sheet.flag(f"{check}{FIRST}:{check}{last}", f'={check}{FIRST}&""<>"ok"')
        sheet.flag(
            f"{PLACE['agrees']}{FIRST}:{PLACE['agrees']}{last}", f'={PLACE["agrees"]}{FIRST}="{DIFFERS}"'
        )
        sheet.flag(f"{PLACE['short']}{FIRST}:{PLACE['short']}{last}", f"=N({PLACE['short']}{FIRST})>0")
        sheet.raw.auto_filter.ref = f"A{FIRST - 1}:{check}{last}"
        sheet.protect()
        sheet.print_setup(landscape=True, repeat=f"{FIRST - 2}:{FIRST - 1}", area=f"A1:{check}{last}")
        paper.fixed_scale(sheet, 58)
        paper.break_after_column(sheet, REQUESTED, "A:B")
        return sheet


def _unit(planned: Planned) -> str:
    return planned.request.unit or planned.kind.parameters[0].name


def _extra_style(planned: Planned) -> str:
    return "input number" if planned.kind.grammar.extra else "result"
