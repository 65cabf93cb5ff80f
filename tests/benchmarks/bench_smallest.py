"""Smallest plans and critical counts against a loop over n with scipy."""

from __future__ import annotations

import numpy as np
from ratio import ratio
from scipy import stats

from steelyard.core.kinds.binomial import BINOMIAL
from steelyard.core.regions import critical_high
from steelyard.core.smallest import smallest_plan, smallest_sizes

CLAIM, ALPHA, CATCH, POWER = 0.01, 0.05, 0.03, 0.9


def looped(lasting):
    """Search n upwards as a user of scipy would; for the lasting size on to where no gap can come."""
    last_bad = 0
    for n in range(1, 1500 if lasting else 10_000):
        c = stats.binom.isf(ALPHA, n, CLAIM) + 1
        if stats.binom.sf(c - 1, n, CATCH) >= POWER:
            if not lasting:
                return n
        else:
            last_bad = n
    return last_bad + 1


@ratio("first smallest plan / loop over n with scipy", limit=1 / 50, sizes=(1,))
def first(cells):
    del cells
    ours = smallest_plan("binomial", CLAIM, ALPHA, CATCH, POWER)
    assert ours.design.n == looped(False)
    return lambda: smallest_plan("binomial", CLAIM, ALPHA, CATCH, POWER), lambda: looped(False)


@ratio("lasting smallest plan / loop over n with scipy", limit=1 / 50, sizes=(1,))
def lasting(cells):
    del cells
    ours = smallest_plan("binomial", CLAIM, ALPHA, CATCH, POWER, lasting=True)
    assert ours.design.n == looped(True)
    return lambda: smallest_plan("binomial", CLAIM, ALPHA, CATCH, POWER, lasting=True), lambda: looped(True)


@ratio("array of smallest plans / one scipy call for each", sizes=(100, 10_000))
def many(cells):
    claims = np.linspace(0.005, 0.05, cells)
    catches = claims * 4
    return (
        lambda: smallest_sizes("binomial", claims, ALPHA, catches, POWER),
        lambda: [stats.binom.sf(3, 100, claim) for claim in claims[:100]],
    )


@ratio("critical counts of many plans / scipy.stats.binom.isf", sizes=(100, 10_000))
def critical(cells):
    n = np.arange(50.0, 50 + cells)
    return lambda: critical_high(BINOMIAL.law, {"n": n}, CLAIM, ALPHA), lambda: stats.binom.isf(
        ALPHA, n, CLAIM
    )
