"""Rules that follow from a claim and alpha.

One rule serves critical regions, p-values, decisions and limits: the region is ``{x: p-value(x) <= alpha}``
(`steelyard.core.splits` says what the p-value is). A tie with alpha rejects; it is decided exactly, on the
decimals as typed. For many designs at once use `critical_high` and `critical_low`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.abilities import rule_making
from steelyard.core.kind import KINDS, Kind, kind_of
from steelyard.core.law import CountLaw
from steelyard.core.numbers import read_choice, read_probability
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import SPLITS, VERDICTS, Claim, Plan
from steelyard.core.splits import (
    ENDS,
    ONE_SIDED,
    Truth,
    critical_high,
    critical_low,
    first_whole,
    tails_of,
    within,
)

__all__ = [
    "EmptyTail",
    "critical_high",
    "critical_low",
    "critical_region",
    "empty_tails",
    "least_amount",
    "make_plan",
]


@dataclass(frozen=True, slots=True)
class EmptyTail:
    """An end of a two-sided plan at which no count can reject.

    Parameters
    ----------
    end : {"low", "high"}
    amount : str
        What the design calls the amount inspected, e.g. ``"n"``.
    least : float
        The smallest whole amount at which some count of that end can reject.

    Examples
    --------
    >>> print(EmptyTail("low", "n", 183.0))
    no low count can reject below n 183
    """

    end: str
    amount: str
    least: float

    def __str__(self) -> str:
        return f"no {self.end} count can reject below {self.amount} {self.least:.0f}"


def make_plan(
    kind_name: str, design: Any, claim: Claim, alpha: float, split: str = "half", verdict: str = "fail"
) -> Plan:
    """Return the plan of a design whose rule follows from its claim and alpha.

    Parameters
    ----------
    kind_name : str
        A registered kind, e.g. ``"binomial"``.
    design : object
        The kind's record of what is inspected, e.g. ``Items(n=50)``.
    claim : Claim
    alpha : float
        Nominal significance level, strictly between 0 and 1.
    split : {"half", "nearest", "rarest"}
        How a two-sided test shares alpha; a one-sided plan has none.
    verdict : {"fail", "pass"}
        What rejecting means for the lot.

    Raises
    ------
    InvalidValue
        When the claim is always true, or no count can reject it: then the smallest amount that can is named.

    Examples
    --------
    >>> from steelyard.core.kinds.binomial import Items
    >>> make_plan("binomial", Items(50), Claim("p", "<=", 0.02), 0.05).rule
    Reject(low=None, high=4.0)
    """
    kind, alpha = KINDS[kind_name], read_probability(alpha, "alpha")
    split = read_choice(split, "split", SPLITS) if claim.side == "either" else "half"
    rule = critical_region(kind, design, claim, alpha, split)
    plan = Plan(kind_name, design, rule, claim, alpha, split, read_choice(verdict, "verdict", VERDICTS))
    kind.verify(plan)
    return plan


def critical_region(kind: Kind, design: Any, claim: Claim, alpha: float, split: str = "half") -> Any:
    """Return the rule that rejects whatever has a p-value of at most alpha.

    Raises
    ------
    InvalidValue
        When the claim is always true, or nothing can reject it.
    NoAnswer
        When rules of this kind do not follow from alpha.
    """
    kind.check_claim(claim, design)
    return rule_making(kind).critical_rule(design, claim, alpha, split)


def empty_tails(plan: Plan) -> list[EmptyTail]:
    """Return the ends at which a two-sided plan cannot reject, although its split gives them a part of alpha.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plan = read_plan("binomial | n 50 | claim p=2% | alpha 5% | reject x>=4")
    >>> [str(tail) for tail in empty_tails(plan)]
    ['no low count can reject below n 183']
    """
    kind, claim, rule = kind_of(plan), plan.claim, plan.rule
    law = getattr(kind, "law", None)
    if not isinstance(law, CountLaw) or claim is None or plan.alpha is None or claim.side != "either":
        return []
    row = design_row(kind, plan.design)
    missing = [end for end in ENDS["either"] if getattr(rule, end) is None]
    found = [(end, least_amount(law, row, claim.value, plan.alpha, end, plan.split)) for end in missing]
    return [
        EmptyTail(end, law.amount, least)
        for end, least in found
        if math.isfinite(least) and least > row[law.amount]
    ]


def design_row(kind: Kind, design: Any) -> Columns:
    """Return the fields of one design by name, as a law takes them."""
    return {field.attribute: np.asarray(getattr(design, field.attribute)) for field in kind.grammar.fields}


def least_amount(law: CountLaw, row: Columns, rate: float, alpha: float, end: str, split: str) -> float:
    """Return the smallest whole amount at which the most extreme count of an end rejects, or infinity.

    Parameters
    ----------
    law : CountLaw
    row : dict
        The fields of one design; its amount is ignored.
    rate : float
        The claim's boundary.
    alpha : float
    end : {"low", "high"}
    split : {"one-sided", "half", "nearest", "rarest"}
    """
    largest = float(law.largest(row))

    def rejects(amount: Floats, split: str = split) -> Truth:
        columns = {**row, law.amount: np.minimum(amount, largest)}
        extreme = np.zeros(()) if end == "low" else np.asarray(law.most(columns), dtype=float)
        tails = tails_of(law, columns, np.asarray(rate), extreme, end, split)
        return within(law, columns, np.asarray(rate), tails, alpha)

    if not rejects(np.asarray(largest)):
        return math.inf
    if split != "rarest":
        return float(first_whole(rejects, np.ones(())))
    # Here the other tail comes and goes as the amount grows; alone the extreme count needs at least this.
    amounts = first_whole(lambda amount: rejects(amount, ONE_SIDED), np.ones(())) + np.arange(64.0)
    while not (found := rejects(amounts)).any():
        amounts = amounts[-1] + 1 + np.arange(2.0 * len(amounts))
    return float(amounts[found.argmax()])
