"""The mean of a measurement whose standard deviation sigma is known: the normal law of the sample mean."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core import tails_continuous as tails
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, claim_of, register
from steelyard.core.law import ContinuousLaw
from steelyard.core.measured import MOST_MEASURED, Measure, MeasuredKind, read_items
from steelyard.core.numbers import read_number, write_number
from steelyard.core.observed import read_measured
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Plan
from steelyard.core.threshold import threshold_fields


@dataclass(frozen=True, slots=True)
class KnownSigma:
    """`n` items measured; single values have the standard deviation `sigma`."""

    n: int
    sigma: float

    def __post_init__(self) -> None:
        if not 1 <= self.n <= MOST_MEASURED:
            raise InvalidValue("n", f"be a whole number from 1 to {MOST_MEASURED}", self.n)
        if not 0 < self.sigma < math.inf:
            raise InvalidValue("sigma", "be greater than 0", self.sigma)


class MeanLaw(ContinuousLaw):
    """The mean of n measurements, normal with standard deviation ``sigma / sqrt(n)``."""

    statistic = "mean"

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(mean <= x)."""
        return tails.normal_at_most(self._score(x, columns, rates[0]))

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(mean >= x)."""
        return tails.normal_at_least(self._score(x, columns, rates[0]))

    def support(self, design: Any) -> tuple[float, float]:
        """Return all numbers."""
        del design
        return -math.inf, math.inf

    def quantile(self, prob: Any, columns: Columns, rate: Floats, end: str) -> Floats:
        """Return the value with the chance `prob` at or below it, or at or above it."""
        away = tails.normal_quantile(prob) * columns["sigma"] / np.sqrt(columns["n"])
        return rate + away if end == "low" else rate - away

    @staticmethod
    def _score(x: Any, columns: Columns, mean: Floats) -> Floats:
        return np.asarray((x - mean) / columns["sigma"] * np.sqrt(columns["n"]))


class NormalKind(MeasuredKind):
    """Tests of a mean with sigma known."""

    law = MeanLaw()
    parameters = (Measure("mean", "mean", "unit of the measurement", -math.inf, math.inf),)
    grammar = Grammar(
        kind="normal",
        head="normal",
        marker="n",
        design=KnownSigma,
        fields=(
            Field("n", read_items(1), default=REQUIRED),
            Field("sigma", read_number, default=REQUIRED),
        ),
        order=("n", "sigma", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="mean of a measurement, sigma known",
            sample="Measure {n} items drawn at random and take the mean; sigma {sigma} is known.",
            found="a sample mean",
            assumptions=(
                "Every item is drawn at random and measured independently of the others.",
                "The standard deviation sigma is known from a stable process.",
                "Single values are about normal, or the sample is large enough for its mean to be.",
                "The measurement is validated: its bias and scatter are small against sigma.",
            ),
        ),
        extra="sigma",
        **threshold_fields("mean", whole=False),
    )

    def read_observed(self, value: Any, plan: Plan) -> float:
        """Return an observed mean, from a number or from ``"mean 499.7 s 0.31"``."""
        del plan
        return read_measured(value, "mean")[0]

    def limit(self, plan: Plan, observed: float, end: str, miss: float) -> float:
        """Return the mean at which the observed one has the chance `miss`."""
        row, tail = self.row(plan.design, claim_of(plan)), "low" if end == "upper" else "high"
        return float(observed - self.law.quantile(self.tail_miss(plan, miss), row, np.zeros(()), tail))

    def native(self, plan: Plan, cell: str) -> str:
        """Return the power by the spreadsheet's normal distribution."""
        scale = f"*SQRT({plan.design.n})/{write_number(plan.design.sigma)}"
        low, high = plan.rule.low, plan.rule.high
        lower = "" if low is None else f"_xlfn.NORM.S.DIST(({write_number(low)}-{cell}){scale},TRUE)"
        upper = "" if high is None else f"_xlfn.NORM.S.DIST(({cell}-{write_number(high)}){scale},TRUE)"
        return "+".join(filter(None, (lower, upper)))


NORMAL = register(NormalKind())
