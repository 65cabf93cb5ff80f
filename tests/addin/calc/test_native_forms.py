"""Powers from Calc's own functions, for the forms of plans and for inspection until so many are found."""

from pathlib import Path

import openpyxl
import pytest

from steelyard.addin.calc import soffice
from steelyard.core import kinds  # noqa: F401  (registers every kind)
from steelyard.core.kind import kind_of
from steelyard.core.questions import power
from steelyard.core.text import read_plan

pytestmark = pytest.mark.calc

PLANS = [
    "binomial | n 50 | misses 0.1 | false-alarms 0.01 | reject x>=4",
    "binomial | n 59 | misses 0.1 | reject x<=0 | verdict pass",
    "binomial | n 80 | misses 0.02 | false-alarms 0.001 | reject x<=2 or x>=20",
    "poisson | units 120 | misses 0.2 | false-alarms 0.002 | reject x>=10",
    "poisson | units 2.5 | misses 0 | false-alarms 3 | reject x<=2 or x>=15",
    "poisson | units 120 | cluster 10 | correlation 0.1 | reject x>=13",
    "poisson | units 120 | cluster 0.5 | correlation 0.6 | reject x<=1 or x>=13",
    "poisson | units 120 | cluster 10 | correlation 0 | reject x>=13",
    "until 3 defectives | reject inspected<=41",
    "until 1 defective | reject inspected>=150 | verdict pass",
    "until 4 defectives | reject inspected<=9 or inspected>=80",
]
RATES = [0.0, 1e-5, 0.001, 0.02, 0.1, 0.3, 0.9]


@pytest.fixture(scope="module")
def calculated(tmp_path_factory: pytest.TempPathFactory) -> list[list[float]]:
    """Return what Calc makes of the formulas: plans in rows, rates in columns."""
    folder: Path = tmp_path_factory.mktemp("native")
    book = openpyxl.Workbook()
    sheet = book.active
    for column, rate in enumerate(RATES, 1):
        sheet.cell(1, column, rate)
        for row, text in enumerate(PLANS, 2):
            plan = read_plan(text)
            formula = kind_of(plan).native(plan, f"{sheet.cell(1, column).column_letter}$1")
            sheet.cell(row, column, f"={formula}")
    book.save(folder / "native.xlsx")
    made = soffice.recalculate(folder / "native.xlsx", folder / "made.xlsx", with_addin=False)
    rows = openpyxl.load_workbook(made, data_only=True).active.iter_rows(min_row=2, values_only=True)
    return [list(row) for row in rows]


@pytest.mark.parametrize("place", range(len(PLANS)), ids=PLANS)
def test_formulas_agree(calculated: list[list[float]], place: int) -> None:
    wanted = [power(read_plan(PLANS[place]), rate) for rate in RATES]
    assert calculated[place] == pytest.approx(wanted, rel=1e-9, abs=1e-14)
