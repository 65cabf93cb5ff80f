"""Exact power of two samples of items against a loop over all outcomes in Python."""

from __future__ import annotations

import math

import numpy as np
from ratio import ratio

from steelyard.core.kind import kind_of
from steelyard.core.kinds.two_binomial import rejected
from steelyard.core.text import read_plan

PLAN = read_plan("two binomial | n 200 and 200 | claim p2<=p1 | alpha 0.05 | test boschloo")


def looped(table, first, second):
    """Return the power at one pair of rates, outcome by outcome."""
    ways = [
        [math.comb(200, k) * rate**k * (1 - rate) ** (200 - k) for k in range(201)]
        for rate in (first, second)
    ]
    return sum(ways[0][x] * ways[1][y] for x in range(201) for y in range(201) if table[x][y])


@ratio("50 pairs of rates, two groups of 200 / looping over the outcomes", limit=1 / 20, sizes=(50,))
def pairs(cells):
    kind, table = kind_of(PLAN), rejected(PLAN).tolist()
    columns, rates = kind.columns([PLAN]), np.linspace(0.05, 0.5, cells)
    return (
        lambda: kind.reject(columns, rates, rates + 0.1),
        lambda: [looped(table, rate, rate + 0.1) for rate in rates.tolist()],
    )
