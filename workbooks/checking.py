"""The checks that a verification record reruns: published values, challenges, accuracy, native formulas.

Every check is a formula as a user types it, so the same list runs in Python and through a spreadsheet
program. What is expected, and how close, stands in the data files beside its source.
"""

from __future__ import annotations

import csv
import hashlib
import math
import random
import tempfile
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from importlib.resources import files
from pathlib import Path
from typing import Any

from steelyard.addin import CATALOGUE
from steelyard.core.errors import SteelyardError
from steelyard.workbooks.formula_tree import read_formula
from steelyard.workbooks.formula_values import evaluate
from steelyard.workbooks.house import Book, Live, Put

DATA = ("check_values.csv", "verification.csv", "challenges.csv")
SAME_IN_PROGRAM = 1e-12
"""Relative difference allowed between the same formula in Python and in the spreadsheet program."""
ACCURACY = 1e-12
POINTS, SEED = 200, 20260
_PASS, _FAIL = "pass", "FAIL"
_LEAST = Fraction(1, 10**290)

Point = tuple[str, float, Fraction]


@dataclass(frozen=True, slots=True)
class Check:
    """One check, and what came of it.

    Parameters
    ----------
    name, what : str
        Its identity, and what is asked in words.
    formula : str
        As a user types it in Excel.
    expected : str
        A number as the source prints it, or a text.
    tolerance : float
        Absolute difference allowed; 0 for texts.
    source, status : str
        Where the expected value comes from, and whether it was read there or is from memory.
    reason : str
        Why the tolerance is not half a unit of the last digit, or what the case challenges.
    computed, through : float or str or None
        The answers in Python and through the spreadsheet program.
    """

    name: str
    what: str
    formula: str
    expected: str
    tolerance: float
    source: str
    status: str
    reason: str = ""
    computed: Any = None
    through: Any = None

    @property
    def difference(self) -> float | None:
        """The absolute difference from what is expected; None between texts."""
        wanted = _number(self.expected)
        return None if wanted is None or isinstance(self.computed, str) else abs(self.computed - wanted)

    @property
    def verdict(self) -> str:
        """``"pass"``, or ``"FAIL"``."""
        if self.difference is None:
            return _PASS if str(self.computed) == self.expected else _FAIL
        return _PASS if self.difference <= self.tolerance * (1 + 1e-9) else _FAIL

    @property
    def program_verdict(self) -> str:
        """The verdict on the spreadsheet program's answer: it must be Python's."""
        if self.through is None:
            return "not run"
        if isinstance(self.computed, str) or isinstance(self.through, str):
            return _PASS if str(self.computed) == str(self.through) else _FAIL
        close = math.isclose(self.computed, self.through, rel_tol=SAME_IN_PROGRAM, abs_tol=1e-300)
        return _PASS if close else _FAIL

    @property
    def fine(self) -> bool:
        """Whether nothing failed."""
        return _FAIL not in (self.verdict, self.program_verdict)


class _Alone:
    """The surroundings of a formula that refers to no cell."""

    def area(self, area: object) -> Any:
        message = f"a check must stand alone, but refers to {area}"
        raise SteelyardError(message)

    def named(self, name: object) -> Any:
        message = f"a check must stand alone, but refers to {name}"
        raise SteelyardError(message)

    def call(self, name: str, arguments: tuple[Any, ...]) -> Any:
        return CATALOGUE[name].function(*arguments)


def answer(formula: str) -> Any:
    """Return the value of a formula without cells.

    Examples
    --------
    >>> answer('=SY_CRITICAL(SY_BINOMIAL(50,2%))')
    4.0
    """
    value = evaluate(read_formula(formula.removeprefix("=")), _Alone())
    return float(value) if isinstance(value, int) and not isinstance(value, bool) else value


def published() -> list[Check]:
    """Return the published values that the functions must reproduce, computed."""
    sources = {row["id"]: row for row in _rows("check_values.csv")}
    return [_published(row, sources[row["id"]]) for row in _rows("verification.csv")]


def _published(row: dict[str, str], source: dict[str, str]) -> Check:
    status = source["read_or_memory"]
    return Check(
        name=row["id"],
        what=f"{source['quantity']}: {source['inputs']}",
        formula=row["formula"],
        expected=source["published"],
        tolerance=float(row["tolerance"] or allowed_difference(source["published"])),
        source=source["source"],
        status="published, read" if status == "read" else f"from {status}, not seen",
        reason=row["reason"],
        computed=answer(row["formula"]),
    )


def challenges() -> list[Check]:
    """Return cases where a careless program goes wrong, computed."""
    return [
        Check(
            name=f"challenge {number}",
            what=row["topic"],
            formula=row["formula"],
            expected=row["expected"],
            tolerance=1e-12 * abs(_number(row["expected"]) or 0.0),
            source="definition",
            status="follows from the definition",
            reason=row["reason"],
            computed=_as_text(answer(row["formula"])),
        )
        for number, row in enumerate(_rows("challenges.csv"), 1)
    ]


def _as_text(value: Any) -> Any:
    return str(value).upper() if isinstance(value, bool) else value


def allowed_difference(text: str) -> float:
    """Return half a unit of the last digit that a source prints, but no less than our own promise.

    Examples
    --------
    >>> allowed_difference(".998"), allowed_difference("4/27")
    (0.0005, 0.0)
    """
    number = _number(text)
    if number is None:
        return 0.0
    places = len(text.partition(".")[2])
    return float(f"{max(0.5 * 10.0**-places, ACCURACY * abs(number)):.7g}")


def _number(text: str) -> float | None:
    try:
        return float(text)
    except ValueError:
        return None


def _rows(name: str) -> list[dict[str, str]]:
    text = (files("steelyard.workbooks") / "data" / name).read_text(encoding="utf-8")
    return list(csv.DictReader(text.splitlines()))


def data_digest() -> str:
    """Return the SHA-256 of the checks themselves."""
    digest = hashlib.sha256()
    for name in DATA:
        digest.update((files("steelyard.workbooks") / "data" / name).read_bytes())
    return digest.hexdigest()


# Accuracy


@dataclass(frozen=True, slots=True)
class Accuracy:
    """The worst relative error of one function over a random grid, against exact arithmetic."""

    what: str
    points: int
    worst: float
    where: str

    @property
    def verdict(self) -> str:
        """``"pass"``, or ``"FAIL"``."""
        return _PASS if self.worst <= ACCURACY else _FAIL


def accuracy() -> list[Accuracy]:
    """Compare power and acceptance with sums of fractions at the exact value of each float rate."""
    chance = random.Random(SEED)
    return [_worst(what, list(points(chance))) for what, points in _GRIDS]


def _worst(what: str, points: Sequence[Point]) -> Accuracy:
    errors = [(abs(float(Fraction(value) / exact - 1)), where) for where, value, exact in points]
    worst, where = max(errors)
    return Accuracy(what, len(points), worst, where)


def _binomial_sum(counts: range, n: int, p: float) -> Fraction:
    """Return the probability of some counts, in whole numbers, at the exact value of a float rate."""
    bad, all_ = p.as_integer_ratio()
    ways = sum(math.comb(n, k) * bad**k * (all_ - bad) ** (n - k) for k in counts)
    return Fraction(ways, all_**n)


def _acceptance_points(chance: random.Random) -> Iterator[Point]:
    for _ in range(POINTS):
        n = chance.randint(2, 400)
        x, p = chance.randint(1, min(n, 25)), 10 ** chance.uniform(-4, -0.2)
        plan = f"binomial | n {n} | reject x>={x}"
        yield f"{plan} at {p!r}", answer(f'=SY_ACCEPTANCE("{plan}",{p!r})'), _binomial_sum(range(x), n, p)


def _power_points(chance: random.Random) -> Iterator[Point]:
    for _ in range(POINTS):
        n = chance.randint(2, 150)
        x, p = chance.randint(1, n), 10 ** chance.uniform(-3, -0.1)
        plan, above = f"binomial | n {n} | reject x>={x}", _binomial_sum(range(x, n + 1), n, p)
        if above > _LEAST:
            yield f"{plan} at {p!r}", answer(f'=SY_POWER("{plan}",{p!r})'), above


def _lot_points(chance: random.Random) -> Iterator[Point]:
    for _ in range(POINTS):
        lot = chance.randint(10, 2000)
        n = chance.randint(1, lot - 1)
        x, bad = chance.randint(1, n), chance.randint(1, lot)
        if x > bad:
            continue
        plan = f"hypergeometric | lot {lot} | n {n} | reject x>={x}"
        ways = sum(math.comb(bad, k) * math.comb(lot - bad, n - k) for k in range(x, min(n, bad) + 1))
        above = Fraction(ways, math.comb(lot, n))
        if above > _LEAST:
            yield f"{plan} at D {bad}", answer(f'=SY_POWER("{plan}",{bad})'), above


_GRIDS = (
    ("binomial: acceptance", _acceptance_points),
    ("binomial: power", _power_points),
    ("hypergeometric: power", _lot_points),
)


# Through the spreadsheet program


def through_calc(checks: Sequence[Check]) -> list[Check]:
    """Return the checks with LibreOffice's answers, each formula typed into a cell of its own.

    Raises
    ------
    SteelyardError
        When LibreOffice is missing or fails.
    """
    from openpyxl import load_workbook

    from steelyard.addin.calc.soffice import recalculate

    book = Book("Checks through the spreadsheet program", "calc")
    sheet = book.sheet("Checks", {"A": 20.0, "B": 20.0})
    for check in checks:
        sheet.add(Put(check.name), Live(check.formula, "not calculated"))
    with tempfile.TemporaryDirectory(prefix="steelyard-") as folder:
        source, target = Path(folder) / "checks.xlsx", Path(folder) / "answers.ods"
        book.save(source)
        recalculate(source, target.with_suffix(".xlsx"))
        cells = load_workbook(target.with_suffix(".xlsx"), data_only=True)["Checks"]["B"]
        answers = [_as_text(cell.value) for cell in cells[: len(checks)]]
    return [replace(check, through=value) for check, value in zip(checks, answers, strict=True)]
