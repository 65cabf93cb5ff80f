"""Powers of measured plans by the spreadsheet's own functions, as Calc computes them."""

from __future__ import annotations

from pathlib import Path

import pytest
from openpyxl import Workbook, load_workbook

from steelyard.addin.calc import soffice
from steelyard.core import kinds  # noqa: F401 - registers them
from steelyard.core.kind import kind_of
from steelyard.core.questions import power
from steelyard.core.text import read_plan

AGREES = 1e-9
MEANS = (480.0, 499.0, 499.7, 500.0, 500.3, 503.0)
FRACTIONS = (0.0, 1e-6, 0.001, 0.01, 0.05, 0.5, 1.0)
LIVES = (10.0, 300.0, 1000.0, 5000.0, 1e6)
CASES: list[tuple[str, tuple[float, ...]]] = [
    ("normal | n 12 | sigma 0.4 | reject mean<=499.81", MEANS),
    ("normal | n 12 | sigma 0.4 | reject mean<=499.77 or mean>=500.23", MEANS),
    ("student | n 12 | planning-sigma 0.4 | claim mean>=500 | reject t<=-1.8", MEANS),
    ("student | n 12 | planning-sigma 0.4 | claim mean=500 | reject t<=-2.2 or t>=2.2", MEANS),
    ("student | n 12 | planning-sigma 0.4 | claim mean=500 | reject t<=-2.2 or t>=2.5", MEANS),
    ("student | n 2 | planning-sigma 0.4 | claim mean<=500 | reject t>=6.3", MEANS),
    ("student | n 3000 | planning-sigma 9 | claim mean<=500 | reject t>=1.65", MEANS),
    ("spread | n 12 | reject s>=0.53", (0.05, 0.3, 0.4, 0.6, 3.0)),
    ("spread | n 12 | reject s<=0.24 or s>=0.56", (0.05, 0.3, 0.4, 0.6, 3.0)),
    ("variables | n 20 | sigma unknown | accept (upper-mean)/s>=1.926 | claim p<=0.01", FRACTIONS),
    ("variables | n 20 | sigma 0.4 | accept (upper-mean)/sigma>=1.926 | claim p<=0.01", FRACTIONS),
    (
        "variables | n 3 | sigma unknown | accept (mean-lower)/s>=2.9 | claim p>=0.05 | verdict pass",
        FRACTIONS,
    ),
    ("life | time 2303 | reject failures<=0 | verdict pass", LIVES),
    ("life | time 5000 | reject failures<=1 or failures>=10", LIVES),
    ("life | units 20 | clock 500 | reject failures<=4 | verdict pass", LIVES),
    ("life | units 20 | clock 500 | reject failures>=9", LIVES),
    ("life | failures 3 | reject time<=500 or time>=6000", LIVES),
]


@pytest.mark.calc
def test_calc_agrees(tmp_path: Path) -> None:
    book = Workbook()
    sheet = book.active
    expected = []
    for text, rates in CASES:
        plan = read_plan(text)
        for rate in rates:
            sheet.append([rate, f"={kind_of(plan).native(plan, f'A{sheet.max_row + bool(expected)}')}"])
            expected.append(power(plan, rate))
    book.save(tmp_path / "native.xlsx")
    saved = soffice.recalculate(tmp_path / "native.xlsx", tmp_path / "saved.xlsx", with_addin=False)
    found = [row[1] for row in load_workbook(saved, data_only=True).active.iter_rows(values_only=True)]
    assert found == pytest.approx(expected, abs=AGREES)
