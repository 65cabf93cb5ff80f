"""Sizes and rates against the published check values; each test's id tells read figures from recalled ones.

MIL-STD-105E's curves use the Poisson law for samples of more than 80, as its rows say; these are asked of the
Poisson kind, in percent of a unit.
"""

from __future__ import annotations

import re
from collections.abc import Callable

import numpy as np
import published
import pytest

import steelyard.core.kinds  # noqa: F401 - registers them
from steelyard.core.demonstration import demonstration
from steelyard.core.kind import KINDS
from steelyard.core.rates import rate_for
from steelyard.core.smallest import count_law, smallest_plan
from steelyard.core.spans import Risk
from steelyard.core.text import read_plan


def percent_at(key: str) -> float:
    """Return the percentage at which a row's plan accepts with the row's probability."""
    row = published.ROWS[key]
    accepted = float(re.search(r"Pa ?= ?([\d.]+) ?%", row["quantity"])[1]) / 100
    n, count = re.search(r"n=(\d+), Ac=(\d+)", row["inputs"]).groups()
    amount = f"poisson | units {n}" if "Poisson" in row["inputs"] else f"binomial | n {n}"
    return 100 * rate_for(read_plan(f"{amount} | reject x>={int(count) + 1}"), round(1 - accepted, 4))


def mean_at(count: int, accepted: float) -> float:
    """Return the mean at which up to `count` events have a probability."""
    return rate_for(read_plan(f"poisson | units 1 | reject x>={count + 1}"), round(1 - accepted, 4))


def operating_ratio(key: str) -> float:
    beta, alpha = (float(text) for text in re.findall(r"np\((\.\d+)\)", published.ROWS[key]["quantity"]))
    count = int(published.ROWS[key]["inputs"].removeprefix("c="))
    return mean_at(count, beta) / mean_at(count, alpha)


def found_none(rate: float, chance: float) -> float:
    """Return the largest n at which no defective is found with at least a probability."""
    number = [np.array([value]) for value in (rate, chance, True, 1.0)]
    keeps = Risk(count_law(KINDS["binomial"]), {}, "low", *number)
    return float(keeps.turn(np.array([0]), np.array([1.0]))[0])


def of_lot(lot: int, defectives: int) -> float:
    """Return the smallest sample that finds none of so many defectives with 5 % at most."""
    plan = smallest_plan("hypergeometric", f"D>={defectives}", 0.05, 0, 0.99, extra=lot)
    assert plan.rule.low == 0
    return float(plan.design.n)


VALUES: dict[str, Callable[[], float]] = {
    **{key: lambda key=key: percent_at(key) for key in published.ROWS if key.startswith("A-K03")},
    **{
        key: lambda row=row: mean_at(int(row["inputs"].removeprefix("c=")), float(row["quantity"][9:]))
        for key, row in published.ROWS.items()
        if key.startswith("A-K04") and row["quantity"].startswith("np at")
    },
    **{
        key: lambda key=key: operating_ratio(key)
        for key, row in published.ROWS.items()
        if row["quantity"].startswith("operating ratio")
    },
    # 194.486 before rounding up: the need for whole units is the row's "after rounding up"
    "A-K04-18": lambda: smallest_plan("poisson", "rate>=2%", 0.1, 0.001, 0.95, whole=False).design.units,
    "A-K05-01": lambda: mean_at(4, 0.95) / 0.04,
    "A-K06-01": lambda: of_lot(100, 5),
    "A-K06-02": lambda: of_lot(200, 4),
    "A-K06-03": lambda: of_lot(500, 25),
    "A-K06-04": lambda: of_lot(1000, 20),
    "A-K06-05": lambda: of_lot(2000, 40),
    "A-K20-01": lambda: demonstration("5%", "95%").design.n,
    "A-K20-02": lambda: demonstration("1%", "95%").design.n,
    "A-K20-03": lambda: demonstration("5%", "90%").design.n,
    "A-K20-04": lambda: demonstration("1%", "99%").design.n,
    "A-K20-05": lambda: demonstration("10%", "99%").design.n,
    "A-K20-06": lambda: demonstration("5%", "95%", 1).design.n,
    "A-K20-07": lambda: demonstration("5%", "95%", 3).design.n,
    "A-K20-09": lambda: found_none(0.001, 0.5),
    "A-K20-10": lambda: found_none(0.001, 0.95),
    "A-K20-11": lambda: demonstration("10%", "90%", 5).design.n,
    "A-K20-12": lambda: demonstration("50%", "90%", 5).design.n,
}


@pytest.mark.parametrize("key", VALUES, ids=published.label)
def test_value(key: str) -> None:
    published.agrees(key, VALUES[key]())


TWO_POINTS = ("A-K05-02", "A-K05-03", "A-K05-04", "A-K05-05")


@pytest.mark.parametrize("key", TWO_POINTS, ids=published.label)
def test_two_point_design(key: str) -> None:
    """The source lists the first size that meets both risks, not the lasting one."""
    row = published.ROWS[key]
    claim, catch, alpha, power = re.findall(r"(?:p0|p1|alpha|power)=([\d.]+)", row["inputs"])
    plan = smallest_plan("binomial", claim, alpha, catch, power)
    assert f"{plan.rule.high:.0f}/{plan.design.n}" == row["published"]


def test_every_row_of_these_tables_is_used() -> None:
    tables = ("A-K03", "A-K04", "A-K05", "A-K20")
    assert {key for key in published.ROWS if key.startswith(tables)} == {
        key for key in [*VALUES, *TWO_POINTS] if key.startswith(tables)
    }
