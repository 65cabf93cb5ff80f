"""Powers as formulas of a spreadsheet's own functions, so that anybody can check a plan without this package.

Small upper tails are lost in ``1 - BINOM.DIST(...)``, and ``BINOM.DIST(n - c, n, 1 - p, TRUE)`` loses them at
rates of some ppm, where ``1 - p`` keeps few digits of p. So the upper tails of binomial and Poisson counts
are written as the beta and gamma distributions that they equal, those of lots as the lower tail of the good
items. Newer functions carry the prefix ``_xlfn.`` that files need. Where a function refuses a value, an
``IF`` stands before it.
"""

from __future__ import annotations

import re

from steelyard.core.numbers import write_number
from steelyard.core.plan import Reject

MOST_DRAWN = 1000  # beyond, HYPGEOM.DIST of LibreOffice 7.4 gives wrong numbers, 0 for 1 among them
_PLAIN = re.compile(r"('[^']+'!|\w+!)?\$?[A-Za-z]{1,3}\$?\d+")


def binomial_native(n: int, rule: Reject, cell: str) -> str:
    """Return the power for the defect rate in a cell.

    Examples
    --------
    >>> binomial_native(50, Reject(None, 4), "B2")
    '_xlfn.BETA.DIST(B2,4,47,TRUE)'
    """
    rate = operand(cell)
    tails = []
    if rule.low is not None:
        tails.append(f"_xlfn.BINOM.DIST({int(rule.low)},{n},{rate},TRUE)")
    if rule.high is not None:
        high = int(rule.high)
        tails.append(f"_xlfn.BETA.DIST({rate},{high},{n - high + 1},TRUE)")
    return "+".join(tails)


def poisson_native(units: float, rule: Reject, cell: str) -> str:
    """Return the power for the defects per unit in a cell.

    Examples
    --------
    >>> poisson_native(120, Reject(None, 11), "B2")
    '_xlfn.GAMMA.DIST(120*B2,11,1,TRUE)'
    """
    rate = operand(cell)
    mean = f"{write_number(units)}*{rate}"
    tails = []
    if rule.low is not None:
        tails.append(f"IF({rate}=0,1,_xlfn.POISSON.DIST({int(rule.low)},{mean},TRUE))")
    if rule.high is not None:
        tails.append(f"_xlfn.GAMMA.DIST({mean},{int(rule.high)},1,TRUE)")
    return "+".join(tails)


def lot_native(lot: int, n: int, rule: Reject, cell: str) -> str | None:
    """Return the power for the number of defectives D in a cell; None for more than `MOST_DRAWN` items.

    Examples
    --------
    >>> lot_native(60, 32, Reject(None, 1), "B2")
    'IF(B2<1,0,IF(60-B2<=31,1,_xlfn.HYPGEOM.DIST(31,32,60-B2,60,TRUE)))'
    """
    if n > MOST_DRAWN:
        return None
    defectives = operand(cell)
    tails = []
    if rule.low is not None:
        low = int(rule.low)
        chance = f"_xlfn.HYPGEOM.DIST({low},{n},{defectives},{lot},TRUE)"
        tails.append(f"IF({defectives}<={low},1,IF({defectives}>{low + lot - n},0,{chance}))")
    if rule.high is not None:
        high = int(rule.high)
        chance = f"_xlfn.HYPGEOM.DIST({n - high},{n},{lot}-{defectives},{lot},TRUE)"
        tails.append(f"IF({defectives}<{high},0,IF({lot}-{defectives}<={n - high},1,{chance}))")
    return "+".join(tails)


def operand(cell: str) -> str:
    """Return a reference as it is, and any other expression in brackets."""
    return cell if _PLAIN.fullmatch(cell) else f"({cell})"
