"""Defectives among items from a process: the binomial law."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from steelyard.core import algebra, exact, inverses, native, tails
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.law import CountLaw, ExactLaw, RateLaw, running_means
from steelyard.core.numbers import read_whole
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import Reject
from steelyard.core.priors import BetaPrior, Prior
from steelyard.core.threshold import CountKind, threshold_fields

MOST_ITEMS = 10_000_000


@dataclass(frozen=True, slots=True)
class Items:
    """`n` items inspected, each defective or not."""

    n: int

    def __post_init__(self) -> None:
        if not 1 <= self.n <= MOST_ITEMS:
            raise InvalidValue("n", f"be a whole number from 1 to {MOST_ITEMS}", self.n)


class BinomialLaw(RateLaw):
    """Defectives among n independent items with defect rate p."""

    statistic, amount, greatest_rate = "x", "n", 1.0

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X <= x)."""
        return tails.binomial_at_most(x, columns["n"], rates[0])

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X >= x)."""
        return tails.binomial_at_least(x, columns["n"], rates[0])

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X = x)."""
        return tails.binomial_pmf(x, columns["n"], rates[0])

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the binomial law in rationals."""
        return exact.BinomialExact(int(row["n"]), rate)

    def tail_rate(self, x: float, columns: Columns, end: str, prob: float) -> float:
        """Return about the p at which a tail has a probability."""
        return inverses.binomial_rate(x, float(columns["n"]), end, prob)

    def even_rate(self, x: float, others: Floats, columns: Columns) -> Floats:
        """Return p with equal chances: its odds are the geometric mean of k/(n - k + 1) between the two."""
        n = columns["n"]
        return 1.0 / (1.0 + np.exp(-running_means(x, others, lambda k: np.log(k / (n - k + 1)))))

    def variance(self, columns: Columns, rate: float) -> float:
        """Return the greatest variance over all p."""
        del rate
        return float(columns["n"]) / 4

    def valley(self, columns: Columns, low: float, high: float) -> float:
        """Return the p at which, of all items but one, `low` and ``high - 1`` defectives are equally likely.

        Only with these numbers among the others does it matter what the one item is.
        """
        others = {"n": columns["n"] - 1}
        return float(self.even_rate(low, np.array([high - 1]), others)[0])

    def leans_high(self, rate: float) -> bool:
        """Tell whether defectives are no more frequent than good items."""
        return rate <= 0.5

    def largest(self, columns: Columns) -> Any:
        """Return the most items of one plan."""
        del columns
        return MOST_ITEMS

    def prior(self, design: Any, a: float, b: float) -> Prior:
        """Return a beta law of the defect rate."""
        del design
        return BetaPrior(a, b)

    def algebra(self, design: Any, rule: Reject) -> str:
        """Return the power as a function of p."""
        return algebra.binomial_power(design.n, rule)

    def native(self, design: Any, rule: Reject, cell: str) -> str:
        """Return a formula for the power at the defect rate in a cell."""
        return native.binomial_native(design.n, rule, cell)


class BinomialKind(CountKind):
    """Single plans for the rate of defectives."""

    law: CountLaw = BinomialLaw()
    parameters = (Parameter("p", "defect rate", "proportion between 0 and 1", 0.0, 1.0),)
    grammar = Grammar(
        kind="binomial",
        head="binomial",
        marker="n",
        design=Items,
        fields=(Field("n", lambda text, name: read_whole(text, name, 1, MOST_ITEMS), default=REQUIRED),),
        order=("n", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="defectives among items from a process",
            sample="Inspect {n} items drawn at random and count the defectives.",
            found="defectives",
            assumptions=(
                "Every item is drawn at random and has the same chance of being chosen.",
                "Items are defective independently of each other, at one rate.",
                "The lot is at least ten times the sample, or the claim is about the process.",
                "Inspection finds every defective and condemns no good item.",
            ),
        ),
        **threshold_fields("x", whole=True),
    )


BINOMIAL = register(BinomialKind())
