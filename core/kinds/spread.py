"""The standard deviation of a measurement: the chi-square law of its square.

A two-sided test has equal tails. It is biased: just beside the claim its power is a little less than alpha.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core import tails_continuous as tails
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.law import ContinuousLaw
from steelyard.core.measured import MOST_MEASURED, Measure, MeasuredKind, read_items
from steelyard.core.numbers import write_number
from steelyard.core.observed import read_measured
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Plan
from steelyard.core.threshold import threshold_fields


@dataclass(frozen=True, slots=True)
class Several:
    """`n` items measured, two at least."""

    n: int

    def __post_init__(self) -> None:
        if not 2 <= self.n <= MOST_MEASURED:
            raise InvalidValue("n", f"be a whole number from 2 to {MOST_MEASURED}", self.n)


class DeviationLaw(ContinuousLaw):
    """The standard deviation s of n measurements: ``(n - 1) s**2 / sigma**2`` is chi-square."""

    statistic = "s"

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(s <= x)."""
        return tails.chi_square_at_most(self._ratio(x, columns, rates[0]), columns["n"] - 1)

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(s >= x)."""
        return tails.chi_square_at_least(self._ratio(x, columns, rates[0]), columns["n"] - 1)

    def support(self, design: Any) -> tuple[float, float]:
        """Return all numbers from 0."""
        del design
        return 0.0, math.inf

    def quantile(self, prob: Any, columns: Columns, rate: Floats, end: str) -> Floats:
        """Return the value with the chance `prob` at or below it, or at or above it."""
        df = columns["n"] - 1
        return np.asarray(rate * np.sqrt(tails.chi_square_quantile(prob, df, end) / df))

    @staticmethod
    def _ratio(x: Any, columns: Columns, sigma: Floats) -> Floats:
        with np.errstate(divide="ignore", over="ignore"):  # a search for a rate may look at sigma 0
            return np.asarray((columns["n"] - 1) * (np.maximum(x, 0.0) / sigma) ** 2)


class SpreadKind(MeasuredKind):
    """Tests of a standard deviation."""

    law = DeviationLaw()
    parameters = (
        Measure("sigma", "standard deviation", "unit of the measurement", 0.0, math.inf, lower_open=True),
    )
    grammar = Grammar(
        kind="spread",
        head="spread",
        marker="n",
        design=Several,
        fields=(Field("n", read_items(2), default=REQUIRED),),
        order=("n", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="standard deviation of a measurement",
            sample="Measure {n} items drawn at random; take the standard deviation s (divisor n - 1).",
            found="a standard deviation s",
            assumptions=(
                "Every item is drawn at random and measured independently of the others.",
                "Single values are normal: this test is sensitive to outliers and skew.",
                "The measurement's own scatter is small against sigma.",
            ),
        ),
        least=2,
        **threshold_fields("s", whole=False),
    )

    def read_observed(self, value: Any, plan: Plan) -> float:
        """Return an observed standard deviation, from a number or from ``"mean 499.7 s 0.31"``."""
        del plan
        (found,) = read_measured(value, "s")
        return found

    def limit(self, plan: Plan, observed: float, end: str, miss: float) -> float:
        """Return the sigma at which the observed s has the chance `miss`."""
        df, tail = plan.design.n - 1, "low" if end == "upper" else "high"
        return observed * math.sqrt(df / tails.chi_square_quantile(self.tail_miss(plan, miss), df, tail))

    def remarks(self, plan: Plan) -> list[str]:
        """Say that a two-sided test of a standard deviation is biased."""
        if plan.claim is None or plan.claim.side != "either":
            return []
        return ["Equal tails: just beside the claim the power is a little below alpha (a biased test)."]

    def native(self, plan: Plan, cell: str) -> str:
        """Return the power by the spreadsheet's chi-square distribution."""
        df, low, high = plan.design.n - 1, plan.rule.low, plan.rule.high
        lower = "" if low is None else f"_xlfn.CHISQ.DIST({df}*({write_number(low)}/{cell})^2,{df},TRUE)"
        upper = "" if high is None else f"_xlfn.CHISQ.DIST.RT({df}*({write_number(high)}/{cell})^2,{df})"
        return "+".join(filter(None, (lower, upper)))


SPREAD = register(SpreadKind())
