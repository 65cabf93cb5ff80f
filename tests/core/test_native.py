"""Powers by a spreadsheet's own functions: as formulas that Python can follow, and as Calc computes them."""

from __future__ import annotations

import math
import random
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from openpyxl import Workbook, load_workbook
from scipy import special, stats  # noqa: TID251 - stands in for the spreadsheet

import steelyard.core.kinds  # noqa: F401 - registers them
from steelyard.addin.calc import soffice
from steelyard.core.kind import kind_of
from steelyard.core.native import MOST_DRAWN
from steelyard.core.plan import Plan
from steelyard.core.text import read_plan

AGREES = 1e-9
RATES = (0, 1, 1e-7, 5e-5, 0.001, 0.02, 0.05, 0.3, 0.5, 0.9, 0.999999)
PER_UNIT = (0, 1e-7, 5e-5, 0.001, 0.02, 0.05, 0.3, 1, 4)
CASES: list[tuple[str, tuple[float, ...]]] = [
    ("binomial | n 1 | reject x>=1", RATES),
    ("binomial | n 50 | reject x>=4", RATES),
    ("binomial | n 59 | reject x<=0", RATES),
    ("binomial | n 80 | reject x<=30 or x>=50", RATES),
    ("binomial | n 500 | reject x>=500", RATES),
    ("binomial | n 46372 | reject x>=6", RATES),
    ("binomial | n 1000000 | reject x>=3", RATES),
    ("poisson | units 1 | reject x>=1", PER_UNIT),
    ("poisson | units 120 | reject x>=11", PER_UNIT),
    ("poisson | units 0.25 | reject x<=0 or x>=3", PER_UNIT),
    ("poisson | units 10000 | reject x<=100 or x>=300", PER_UNIT),
    ("hypergeometric | lot 60 | n 32 | reject x>=1", (0, 1, 3, 28, 29, 59, 60)),
    ("hypergeometric | lot 60 | n 60 | reject x>=5", (0, 4, 5, 6, 59, 60)),
    ("hypergeometric | lot 60 | n 60 | reject x<=5", (0, 4, 5, 6, 59, 60)),
    ("hypergeometric | lot 800 | n 50 | reject x<=2 or x>=20", (0, 2, 3, 16, 400, 752, 753, 800)),
    ("hypergeometric | lot 20 | n 1 | reject x<=0", (0, 1, 19, 20)),
    ("hypergeometric | lot 1000 | n 900 | reject x>=890", (0, 889, 890, 950, 989, 990, 1000)),
    ("hypergeometric | lot 1000000 | n 1000 | reject x>=20", (0, 19, 20, 5000, 20000, 500000, 1000000)),
    ("binomial | stages 50 then 50 | accept 1 then 4 | reject 4 then 5", RATES),
    ("binomial | stages 10 then 19 | accept 1 then 5 | reject none then 6", RATES),
    ("binomial | stages 50 | accept 3 | reject 4", RATES),
    ("poisson | stages 12.5 then 25 | accept 1 then 4 | reject 4 then 5", PER_UNIT),
    (
        "hypergeometric | lot 800 | stages 50 then 50 | accept 1 then 4 | reject 4 then 5",
        (0, 1, 3, 4, 5, 8, 40, 700, 704, 705, 706, 750, 751, 752, 754, 755, 799, 800),
    ),
    (
        "hypergeometric | lot 40 | stages 10 then 10 | accept none then 1 | reject 2 then 2",
        (0, 1, 2, 3, 20, 21, 22, 23, 31, 40),
    ),
    (
        "hypergeometric | lot 40 | stages 15 then 20 | accept 0 then 2 | reject 3 then 3",
        (0, 2, 3, 7, 8, 9, 24, 25, 26, 37, 38, 40),
    ),
]


def expected(plan: Plan, rate: float) -> float:
    kind = kind_of(plan)
    return float(kind.reject(kind.columns([plan]), np.array([float(rate)]))[0])


def formula(plan: Plan, cell: str) -> str:
    found = kind_of(plan).native(plan, cell)
    assert found is not None
    return found


def close(value: float, wanted: float) -> bool:
    """Agree to nine digits; a power below 1e-290 may well be 0 in a spreadsheet."""
    return math.isclose(value, wanted, rel_tol=AGREES, abs_tol=1e-290)


FUNCTIONS: dict[str, Callable[..., Any]] = {
    "BINOM_DIST": lambda x, n, p, _: stats.binom.cdf(x, n, p),
    "BETA_DIST": lambda x, a, b, _: special.betainc(a, b, x),
    "POISSON_DIST": lambda x, mean, _: stats.poisson.cdf(x, mean),
    "GAMMA_DIST": lambda x, a, b, _: special.gammainc(a, x / b),
    "HYPGEOM_DIST": lambda x, n, defectives, lot, _: stats.hypergeom.cdf(x, lot, defectives, n),
    "IF": lambda condition, then, otherwise: then if condition else otherwise,
    "TRUE": True,
}


def followed(text: str, rate: float) -> float:
    """Return the value of a formula by functions of scipy in the place of the spreadsheet's."""
    python = text.replace("_xlfn.", "").replace(".DIST", "_DIST").replace("B2=0", "B2==0")
    return float(eval(python, {"__builtins__": {}}, {**FUNCTIONS, "B2": rate}))


def test_formulas_are_the_power_at_random_plans() -> None:
    rng = random.Random(8)
    for _ in range(300):
        kind = rng.choice(("binomial", "poisson", "hypergeometric"))
        lot = rng.randint(2, 300)
        n = rng.randint(1, lot)
        low, high = sorted(rng.sample(range(-1, n + 2), 2))
        if not 2 <= high - low < n + 2:
            continue
        ends = [*([f"x<={low}"] if low >= 0 else []), *([f"x>={high}"] if high <= n else [])]
        amount = {"binomial": f"n {n}", "poisson": f"units {n}", "hypergeometric": f"lot {lot} | n {n}"}[kind]
        rates = {
            "binomial": (0.0, 1.0, rng.random()),
            "poisson": (0.0, rng.random(), 3.0 * rng.random()),
            "hypergeometric": (0, lot, rng.randint(0, lot)),
        }[kind]
        plan = read_plan(f"{kind} | {amount} | reject {' or '.join(ends)}")
        for rate in rates:
            assert close(followed(formula(plan, "B2"), rate), expected(plan, rate)), (plan, rate)


@pytest.mark.calc
def test_calc_agrees(tmp_path: Path) -> None:
    book = Workbook()
    rows = [(read_plan(text), rate) for text, rates in CASES for rate in rates]
    for number, (plan, rate) in enumerate(rows, 1):
        book.active.cell(number, 1, rate)
        book.active.cell(number, 2, "=" + formula(plan, f"A{number}"))
    book.save(tmp_path / "native.xlsx")
    saved = soffice.recalculate(tmp_path / "native.xlsx", tmp_path / "saved.xlsx", with_addin=False)
    values = [cell.value for cell in load_workbook(saved, data_only=True).active["B"]]
    for (plan, rate), value in zip(rows, values, strict=True):
        assert isinstance(value, int | float), (plan, rate, value)
        assert close(value, expected(plan, rate)), (plan, rate, value)


@pytest.mark.parametrize(
    ("text", "cell", "wanted"),
    [
        ("binomial | n 50 | reject x>=4", "B2", "_xlfn.BETA.DIST(B2,4,47,TRUE)"),
        ("binomial | n 59 | reject x<=0", "$B$2", "_xlfn.BINOM.DIST(0,59,$B$2,TRUE)"),
        ("binomial | n 59 | reject x<=0", "'At 5 %'!B2", "_xlfn.BINOM.DIST(0,59,'At 5 %'!B2,TRUE)"),
        ("poisson | units 2.5 | reject x>=4", "B2/100", "_xlfn.GAMMA.DIST(2.5*(B2/100),4,1,TRUE)"),
        (
            "poisson | units 120 | reject x<=2 or x>=11",
            "B2",
            "IF(B2=0,1,_xlfn.POISSON.DIST(2,120*B2,TRUE))+_xlfn.GAMMA.DIST(120*B2,11,1,TRUE)",
        ),
        (
            "hypergeometric | lot 60 | n 32 | reject x<=1",
            "B2",
            "IF(B2<=1,1,IF(B2>29,0,_xlfn.HYPGEOM.DIST(1,32,B2,60,TRUE)))",
        ),
    ],
)
def test_wording(text: str, cell: str, wanted: str) -> None:
    assert formula(read_plan(text), cell) == wanted


def test_large_samples_of_a_lot_have_no_formula() -> None:
    plan = read_plan(f"hypergeometric | lot 5000 | n {MOST_DRAWN + 1} | reject x>=40")
    assert kind_of(plan).native(plan, "B2") is None
