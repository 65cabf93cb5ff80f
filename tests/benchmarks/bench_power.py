"""Tables of power through the cell functions, against the bare special function on the same grid."""

from __future__ import annotations

import math

import numpy as np
from ratio import ratio, relative_error
from scipy import special, stats

from steelyard.addin import SY_POWER
from steelyard.addin.plans import forget
from steelyard.core.kinds.hypergeometric import HYPERGEOMETRIC

RATES = (0.001, 0.2)


def table(cells, rule):
    """Return plan texts down, rates across, and the same as arrays."""
    side = max(2, math.isqrt(cells))
    n = np.linspace(20, 500, side).astype(int)
    low, high = rule(n)
    plans = [
        [f"binomial | n {items} | reject " + " or ".join(filter(None, ends))]
        for items, ends in zip(n, zip(low, high, strict=True), strict=True)
    ]
    return plans, [np.linspace(*RATES, side).tolist()], n[:, None].astype(float)


def above(n):
    return ["" for _ in n], [f"x>={2 + items // 50}" for items in n]


def either(n):
    return [f"x<={items // 100}" for items in n], [f"x>={4 + items // 50}" for items in n]


@ratio("power grid through SY_POWER / betainc", limit=1.3, error=relative_error)
def power_grid(cells):
    plans, rates, n = table(cells, above)
    c, p = 2 + n // 50, np.array(rates)
    return lambda: SY_POWER(plans, rates), lambda: special.betainc(c, n - c + 1, p)


@ratio("two-sided power grid through SY_POWER / betainc", limit=2.6)
def two_sided_grid(cells):
    plans, rates, n = table(cells, either)
    c, p = 4 + n // 50, np.array(rates)
    return lambda: SY_POWER(plans, rates), lambda: special.betainc(c, n - c + 1, p)


@ratio("new scalar question / betainc", limit=40, sizes=(1,))
def scalar_question(cells):
    del cells
    plan, counter = "binomial | n 50 | reject x>=4", iter(range(10**9))

    def ask():
        return SY_POWER(plan, 0.05 + next(counter) * 1e-10)

    return ask, lambda: special.betainc(4.0, 47.0, 0.05)


@ratio("repeated scalar question / betainc", limit=20, sizes=(1,))
def repeated_question(cells):
    del cells
    plan = "binomial | n 50 | reject x>=4"
    return lambda: SY_POWER(plan, 0.05), lambda: special.betainc(4.0, 47.0, 0.05)


@ratio("plan texts read anew / one betainc each", sizes=(100, 10_000))
def texts_read(cells):
    texts = [[f"binomial | n {50 + i} | claim p<=0.02 | alpha 0.05 | reject x>=4"] for i in range(cells)]
    n = np.arange(50.0, 50 + cells)

    def ask():
        forget()
        return SY_POWER(texts, 0.05)

    return ask, lambda: special.betainc(4.0, n - 3, 0.05)


@ratio("hypergeometric curve / scipy.stats.hypergeom", limit=1 / 20, sizes=(400, 2000), error=relative_error)
def hypergeometric_curve(cells):
    lot, n, c = 2000, 125, 4
    defectives = np.linspace(lot / cells, lot / 2, cells).astype(int).astype(float)
    columns = {"lot": np.array([lot]), "n": np.array([n]), "low": np.array([np.nan]), "high": np.array([c])}
    return (
        lambda: HYPERGEOMETRIC.accept(columns, defectives),
        lambda: stats.hypergeom.cdf(c - 1, lot, defectives.astype(int), n),
    )
