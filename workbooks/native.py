"""Power from the spreadsheet's own functions, so that anybody can check a plan without Steelyard.

The formulas take sample size and critical counts from cells and follow when these change. Upper tails are
lower tails of the items that are not counted, because 1 minus a lower tail loses small probabilities; for
defects per unit they are a gamma distribution.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from steelyard.core.kind import kind_of
from steelyard.core.law import CountLaw
from steelyard.core.parameter import Columns
from steelyard.core.plan import Plan, Reject
from steelyard.core.threshold import ThresholdKind


@dataclass(frozen=True, slots=True)
class Tails:
    """Formulas of the two tails of a kind's statistic; fields of the design, ``x`` and ``rate`` are cells."""

    at_most: str
    at_least: str


# A hypergeometric count has a least and a greatest value, outside which the spreadsheet's function fails.
TAILS = {
    "binomial": Tails("BINOM.DIST({x},{n},{rate},TRUE)", "BINOM.DIST({n}-{x},{n},1-{rate},TRUE)"),
    "poisson": Tails(
        "POISSON.DIST({x},{units}*{rate},TRUE)", "IF({rate}=0,0,GAMMA.DIST({units}*{rate},{x},1,TRUE))"
    ),
    "hypergeometric": Tails(
        "IF({x}>=MIN({n},{rate}),1,IF({x}<{n}+{rate}-{lot},0,HYPGEOM.DIST({x},{n},{rate},{lot},TRUE)))",
        "IF({x}>MIN({n},{rate}),0,IF({x}<={n}+{rate}-{lot},1,"
        "HYPGEOM.DIST({n}-{x},{n},{lot}-{rate},{lot},TRUE)))",
    ),
}


def power_formula(kind: str, low: str, high: str, rate: str, **design: str) -> str:
    """Return the chance that the claim is rejected, from cells; a text as critical count is an empty tail.

    Examples
    --------
    >>> power_formula("binomial", "C2", "D2", "E2", n="B2")
    'IF(ISTEXT(C2),0,BINOM.DIST(C2,B2,E2,TRUE))+IF(ISTEXT(D2),0,BINOM.DIST(B2-D2,B2,1-E2,TRUE))'
    """
    tails = TAILS[kind]
    lower = tails.at_most.format(x=low, rate=rate, **design)
    upper = tails.at_least.format(x=high, rate=rate, **design)
    return f"IF(ISTEXT({low}),0,{lower})+IF(ISTEXT({high}),0,{upper})"


def power_values(plan: Plan, rates: Sequence[float]) -> list[float]:
    """Return what those formulas give, summed count by count and not by the tail functions of `SY_POWER`.

    Parameters
    ----------
    plan : Plan
        Of a kind that counts.
    rates : sequence of float
        In the parameter's own unit.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> round(power_values(read_plan("binomial | n 50 | reject x>=4"), [0.1])[0], 4)
    0.7497
    """
    kind = kind_of(plan)
    assert isinstance(kind, ThresholdKind)
    assert isinstance(kind.law, CountLaw)
    return [_power(kind.law, kind.columns([plan]), plan.rule, float(rate)) for rate in rates]


def _power(law: CountLaw, columns: Columns, rule: Reject, rate: float) -> float:
    mean = float((law.share(columns, np.array([rate])) * columns[law.amount])[0])
    reach = (
        12 * math.sqrt(mean) + 60
    )  # what lies farther from both the mean and the critical count is nothing
    most = float(np.max(law.most(columns)))
    counts = []
    if rule.low is not None:
        counts.append(np.arange(max(0, math.floor(min(rule.low, mean) - reach)), rule.low + 1))
    if rule.high is not None:
        counts.append(np.arange(rule.high, min(most, max(rule.high, mean) + reach) + 1))
    return min(1.0, float(law.exactly(np.concatenate(counts), columns, np.array([rate])).sum()))
