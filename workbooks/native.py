"""Power from the spreadsheet's own functions, so that anybody can check a plan without Steelyard.

Unlike those of SY_NATIVE, the formulas here take sample size and critical counts from cells, and follow when
these change. Upper tails are a beta or a gamma distribution, in lots the lower tail of the good items:
1 minus a lower tail loses small probabilities.

Kinds of plan that do not count have the formula of SY_NATIVE, with the numbers of the plan as it was built.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from steelyard.core.kind import kind_of
from steelyard.core.law import CountLaw
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan, Reject
from steelyard.core.questions import power
from steelyard.core.threshold import CountKind


@dataclass(frozen=True, slots=True)
class Tails:
    """Formulas of the two tails of a kind's statistic; fields of the design, ``x`` and ``rate`` are cells."""

    at_most: str
    at_least: str


# A hypergeometric count has a least and a greatest value, outside which the spreadsheet's function fails.
TAILS = {
    "binomial": Tails("BINOM.DIST({x},{n},{rate},TRUE)", "BETA.DIST({rate},{x},{n}-{x}+1,TRUE)"),
    "poisson": Tails(
        "IF({rate}=0,1,POISSON.DIST({x},{units}*{rate},TRUE))", "GAMMA.DIST({units}*{rate},{x},1,TRUE)"
    ),
    "hypergeometric": Tails(
        "IF({x}>=MIN({n},{rate}),1,IF({x}<{n}+{rate}-{lot},0,HYPGEOM.DIST({x},{n},{rate},{lot},TRUE)))",
        "IF({x}>MIN({n},{rate}),0,IF({x}<={n}+{rate}-{lot},1,"
        "HYPGEOM.DIST({n}-{x},{n},{lot}-{rate},{lot},TRUE)))",
    ),
}


def follows(plan: Plan) -> bool:
    """Tell whether a plan's native formula follows the cells of its critical counts."""
    return plan.kind in TAILS and kind_of(plan).native(plan, "A1") is not None


def power_formula(kind: str, low: str, high: str, rate: str, **design: str) -> str:
    """Return the chance that the claim is rejected, from cells; a text as critical count is an empty tail.

    Examples
    --------
    >>> power_formula("binomial", "C2", "D2", "E2", n="B2")
    'IF(ISTEXT(C2),0,BINOM.DIST(C2,B2,E2,TRUE))+IF(ISTEXT(D2),0,BETA.DIST(E2,D2,B2-D2+1,TRUE))'
    """
    tails = TAILS[kind]
    lower = tails.at_most.format(x=low, rate=rate, **design)
    upper = tails.at_least.format(x=high, rate=rate, **design)
    return f"IF(ISTEXT({low}),0,{lower})+IF(ISTEXT({high}),0,{upper})"


def power_values(plans: Sequence[Plan], rates: Sequence[Sequence[float]]) -> list[list[float]]:
    """Return what the formulas give; counts are summed one by one, not by the tail functions of `SY_POWER`.

    Parameters
    ----------
    plans : sequence of Plan
    rates : sequence of sequence of float
        For each plan the rates, in the parameter's own unit.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> [[value]] = power_values([read_plan("binomial | n 50 | reject x>=4")], [[0.1]])
    >>> round(value, 4)
    0.7497
    """
    answers: list[list[float]] = [[] for _ in plans]
    groups: dict[str, list[int]] = {}
    for place, plan in enumerate(plans):
        if not rates[place]:
            continue
        if follows(plan):
            groups.setdefault(plan.kind, []).append(place)
        else:
            answers[place] = [power(plan, rate) for rate in rates[place]]
    for places in groups.values():
        summed = _summed([plans[place] for place in places], [rates[place] for place in places])
        for place, values in zip(places, summed, strict=True):
            answers[place] = values
    return answers


def _summed(plans: Sequence[Plan], rates: Sequence[Sequence[float]]) -> list[list[float]]:
    """Return the powers of plans of one kind, from the point probabilities of all of them in one call."""
    kind = kind_of(plans[0])
    assert isinstance(kind, CountKind)
    owner = np.repeat(np.arange(len(plans)), [len(line) for line in rates])
    columns = {name: values[owner] for name, values in kind.columns(plans).items()}
    given = np.concatenate([np.asarray(line, dtype=float) for line in rates])
    law: CountLaw = kind.law
    means = law.share(columns, given) * columns[law.amount]
    most = np.broadcast_to(law.most(columns), given.shape)
    counts = [_counts(plans[own].rule, means[at], most[at]) for at, own in enumerate(owner.tolist())]
    sizes = [len(line) for line in counts]
    spread = {name: np.repeat(values, sizes) for name, values in columns.items()}
    points = law.exactly(np.concatenate(counts), spread, np.repeat(given, sizes))
    sums = np.minimum(np.add.reduceat(points, np.cumsum([0, *sizes[:-1]])), 1.0)
    return [[float(value) for value in sums[owner == place]] for place in range(len(plans))]


def _counts(rule: Reject, mean: float, most: float) -> Floats:
    """Return the counts that reject, without those too far from both the mean and the rule to matter."""
    reach = 12 * math.sqrt(mean) + 60
    counts = []
    if rule.low is not None:
        counts.append(np.arange(max(0.0, math.floor(min(rule.low, mean) - reach)), rule.low + 1))
    if rule.high is not None:
        counts.append(np.arange(rule.high, min(most, max(rule.high, mean) + reach) + 1))
    return np.concatenate(counts)
