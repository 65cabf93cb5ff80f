"""The mean of a measurement whose standard deviation is unknown: Student's t, its power by noncentral t.

The statistic is ``t = (mean - claim) sqrt(n) / s``. Its power depends on the true sigma beside the true mean:
a question gives sigma as its second parameter, or the plan knows a planning sigma.

References
----------
D. B. Owen, Biometrika 52 (1965), 437-446 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core import tails_continuous as tails
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, claim_of, register
from steelyard.core.law import ContinuousLaw
from steelyard.core.measured import MOST_MEASURED, Measure, MeasuredKind, read_items
from steelyard.core.native_t import t_power
from steelyard.core.need import Need
from steelyard.core.numbers import read_number, write_number
from steelyard.core.observed import Sample, read_measured
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Claim, Plan
from steelyard.core.tails_noncentral import student_at_least, student_at_most
from steelyard.core.threshold import threshold_fields

MOST_T = 1e15
_UNIT = "unit of the measurement"


@dataclass(frozen=True, slots=True)
class UnknownSigma:
    """`n` items measured, two at least; `planning_sigma` is the guess that power is computed with."""

    n: int
    planning_sigma: float | None = None

    def __post_init__(self) -> None:
        if not 2 <= self.n <= MOST_MEASURED:
            raise InvalidValue("n", f"be a whole number from 2 to {MOST_MEASURED}", self.n)
        if self.planning_sigma is not None and not 0 < self.planning_sigma < math.inf:
            raise InvalidValue("planning-sigma", "be greater than 0", self.planning_sigma)


class StudentLaw(ContinuousLaw):
    """Noncentral t with n - 1 degrees of freedom and ``delta = (mean - claim) sqrt(n) / sigma``."""

    statistic = "t"

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(t <= x)."""
        return self._tail(student_at_most, x, columns, *rates)

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(t >= x)."""
        return self._tail(student_at_least, x, columns, *rates)

    def support(self, design: Any) -> tuple[float, float]:
        """Return the values that t may take; farther ones are beyond any use."""
        del design
        return -MOST_T, MOST_T

    def quantile(self, prob: Any, columns: Columns, rate: Floats, end: str) -> Floats:
        """Return the central quantile: `rate` is the claim's own boundary."""
        del rate
        return tails.student_quantile(prob, columns["n"] - 1, end)

    @staticmethod
    def _tail(tail: Any, x: Any, columns: Columns, mean: Floats, sigma: Floats | None = None) -> Floats:
        """Return a tail, NaN where sigma is neither asked for nor known; at the claim it does not matter."""
        away = mean - columns["claim"]
        scale = columns["planning_sigma"] if sigma is None else sigma
        delta = np.where(away == 0, 0.0, away / scale * np.sqrt(columns["n"]))
        return np.where(np.isnan(delta), np.nan, tail(x, columns["n"] - 1, np.nan_to_num(delta)))


class StudentKind(MeasuredKind):
    """Tests of a mean with sigma unknown."""

    law = StudentLaw()
    parameters = (
        Measure("mean", "mean", _UNIT, -math.inf, math.inf),
        Measure("sigma", "standard deviation", _UNIT, 0.0, math.inf, lower_open=True, optional=True),
    )
    grammar = Grammar(
        kind="student",
        head="student",
        marker="n",
        design=UnknownSigma,
        fields=(Field("n", read_items(2), default=REQUIRED), Field("planning-sigma", read_number)),
        order=("n", "planning-sigma", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="mean of a measurement, sigma unknown",
            sample="Measure {n} items drawn at random; take the mean and the standard deviation s.",
            found="t = (mean - claim) √n / s",
            assumptions=(
                "Every item is drawn at random and measured independently of the others.",
                "Single values are about normal, or the sample is large and without far outliers.",
                "The planning sigma is about right: the power depends on it, the size does not.",
                "The measurement is validated: its bias and scatter are small against sigma.",
            ),
        ),
        extra="planning_sigma",
        least=2,
        **threshold_fields("t", whole=False),
    )

    def row(self, design: Any, claim: Claim) -> Columns:
        """Return n, the planning sigma (NaN where there is none) and the claim, from which t is measured."""
        sigma = np.nan if design.planning_sigma is None else design.planning_sigma
        found = {"n": design.n, "planning_sigma": sigma, "claim": claim.value}
        return {name: np.asarray(value) for name, value in found.items()}

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return the plans' rows, and the rules' ends."""
        columns = super().columns(plans)
        columns["planning_sigma"] = columns["planning_sigma"].astype(float)
        columns["claim"] = np.array([claim_of(plan).value for plan in plans])
        return columns

    def takes(self, plan: Plan) -> tuple[int, int]:
        """Return that the mean will do where the plan knows a planning sigma."""
        return 2 if plan.design.planning_sigma is None else 1, 2

    def verify(self, plan: Plan) -> None:
        """Refuse also a plan without a claim, from which t is measured."""
        if plan.claim is None:
            rule = "be written in the plan: t counts from it"
            raise InvalidValue("claim", rule, None, "e.g. claim mean>=500")
        super().verify(plan)

    def read_observed(self, value: Any, plan: Plan) -> Sample:
        """Return an observed mean and standard deviation, such as ``"mean 499.7 s 0.31"``."""
        del plan
        mean, s = read_measured(value, "mean", "s")
        return Sample(mean, s)

    def outcome(self, plan: Plan, observed: Sample) -> bool | str:
        """Tell whether t rejects the claim."""
        return super().outcome(plan, _t(plan, observed))

    def p_value(self, plan: Plan, observed: Sample) -> float:
        """Return the p-value of t."""
        return super().p_value(plan, _t(plan, observed))

    def limit(self, plan: Plan, observed: Sample, end: str, miss: float) -> float:
        """Return the mean at which the observed t has the chance `miss`."""
        n, tail = plan.design.n, "low" if end == "upper" else "high"
        t = tails.student_quantile(self.tail_miss(plan, miss), n - 1, tail)
        return float(observed.mean - t * observed.s / math.sqrt(n))

    def smallest_amount(self, need: Need, lasting: bool) -> float:
        """Return the least n that meets a need with its planning sigma."""
        if need.design.planning_sigma is None:
            raise InvalidValue("sigma", "be given to find the smallest plan of kind student", None)
        return super().smallest_amount(need, lasting)

    def native(self, plan: Plan, cell: str) -> str | None:
        """Return the power as a sum of normal probabilities over s, for the mean in a cell."""
        design, rule = plan.design, plan.rule
        if design.planning_sigma is None:
            return None
        scale = write_number(math.sqrt(design.n) / design.planning_sigma)
        delta = f"({cell}-{write_number(claim_of(plan).value)})*{scale}"
        return t_power(rule.low, rule.high, design.n - 1, delta)

    def told(self, plan: Plan) -> str:
        """Return in words what rejects the claim."""
        signs = [("or less", plan.rule.low), ("or more", plan.rule.high)]
        ends = ", or ".join(f"{end:.8g} {sign}" for sign, end in signs if end is not None)
        return f"t = (mean - {write_number(claim_of(plan).value)}) * sqrt({plan.design.n}) / s of {ends}"


def _t(plan: Plan, sample: Sample) -> float:
    return float((sample.mean - claim_of(plan).value) / sample.s * math.sqrt(plan.design.n))


STUDENT = register(StudentKind())
