"""Curves of plans that inspect part by part against the curve of a single plan."""

from __future__ import annotations

import numpy as np
from ratio import ratio

from steelyard.addin import SY_AVERAGE_SAMPLE, SY_POWER
from steelyard.core.sequential import sequential_plan
from steelyard.core.text import write_plan

SINGLE = "binomial | n 125 | reject x>=4"
DOUBLE = "binomial | stages 50 then 50 | accept 1 then 4 | reject 4 then 5"
SEVEN = (
    "binomial | stages 32 then 32 then 32 then 32 then 32 then 32 then 32"
    " | accept 1 then 4 then 8 then 12 then 17 then 21 then 25"
    " | reject 7 then 10 then 13 then 17 then 20 then 23 then 26"
)
SEQUENTIAL = write_plan(sequential_plan("1%", "5%", "10%", "90%", 1000))
LOT = "hypergeometric | lot 800 | n 125 | reject x>=4"
LOT_SEVEN = SEVEN.replace("binomial |", "hypergeometric | lot 800 |")


def curves(plan, single, rates):
    return lambda: SY_POWER(plan, [rates]), lambda: SY_POWER(single, [rates])


@ratio("200 points: double plan / single plan", limit=20, sizes=(200,))
def double(cells):
    return curves(DOUBLE, SINGLE, np.linspace(0.001, 0.2, cells).tolist())


@ratio("200 points: seven stages / single plan", limit=20, sizes=(200,))
def seven(cells):
    return curves(SEVEN, SINGLE, np.linspace(0.001, 0.2, cells).tolist())


@ratio("200 points: seven stages in a lot / single plan", limit=20, sizes=(200,))
def seven_in_a_lot(cells):
    return curves(LOT_SEVEN, LOT, [float(d) for d in range(cells)])


@ratio("200 points: sequential to 1,000 items / single plan", limit=50, sizes=(200,))
def sequential(cells):
    return curves(SEQUENTIAL, SINGLE, np.linspace(0.001, 0.2, cells).tolist())


@ratio("200 averages: sequential to 1,000 items / power of a single plan", limit=50, sizes=(200,))
def averages(cells):
    rates = np.linspace(0.001, 0.2, cells).tolist()
    return lambda: SY_AVERAGE_SAMPLE(SEQUENTIAL, [rates]), lambda: SY_POWER(SINGLE, [rates])
