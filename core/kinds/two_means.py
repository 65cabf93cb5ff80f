"""Two samples of a measurement, and whether their means differ: pooled t and Welch's test.

The power depends on the planning sigmas, one for both samples or one for each. The pooled t assumes equal
ones; its power is then a noncentral t. In every other case the noncentral t is averaged over the share of
the first sample in the sums of squares: exact, up to quadrature. Relative error of power at most 1e-10 for
2 to 1,000 items each, sigmas up to 100 times each other and powers from 1e-30.

The size is that at the planning sigmas: with Welch's test only about alpha, with the pooled t and unequal
sigmas not even that.

References
----------
B. L. Welch, Biometrika 34 (1947), 28-35; B. K. Moser, G. R. Stevens and C. L. Watts, Commun. Statist. A 18
(1989), 3963-3975 (from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.comparing import alpha_of, derived_fields, read_pair, side_of, write_pair
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.measured import Measure
from steelyard.core.numbers import read_choice, read_number, read_whole, write_number
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan
from steelyard.core.splits import ENDS
from steelyard.core.tails_continuous import student_quantile
from steelyard.core.tails_noncentral import student_at_least, student_at_most
from steelyard.core.tails_two import mean_over_share
from steelyard.core.two_measured import MOST_EACH, TwoMeasuredKind, end_alpha

TESTS = ("t", "welch")
_UNIT = "unit of the measurement"
_MOST_RATIO = 100


@dataclass(frozen=True, slots=True)
class TwoMeans:
    """`n` items measured in either sample, the test, and the sigmas that power is computed with."""

    n: tuple[int, int]
    planning_sigma: tuple[float, float]
    test: str

    def __post_init__(self) -> None:
        if not all(2 <= items <= MOST_EACH for items in self.n):
            raise InvalidValue("n", f"name two whole numbers from 2 to {MOST_EACH}", write_pair(self.n))
        low, high = sorted(self.planning_sigma)
        if not 0 < low <= high < math.inf or high > _MOST_RATIO * low:
            rule = f"be greater than 0, neither more than {_MOST_RATIO} times the other"
            raise InvalidValue("planning-sigma", rule, write_pair(self.planning_sigma))

    @property
    def error(self) -> float:
        """The true standard error of the difference."""
        pairs = zip(self.planning_sigma, self.n, strict=True)
        return math.hypot(*(sigma / math.sqrt(items) for sigma, items in pairs))

    def estimate(self, first: Any, second: Any) -> tuple[Any, Any]:
        """Return the estimated error of the difference and its degrees of freedom, from two variances."""
        n, m = self.n
        if self.test == "t":
            pooled = ((n - 1) * first + (m - 1) * second) / (n + m - 2)
            return np.sqrt(pooled * (1 / n + 1 / m)), np.asarray(n + m - 2.0)
        parts = first / n, second / m
        both = parts[0] + parts[1]
        return np.sqrt(both), both**2 / (parts[0] ** 2 / (n - 1) + parts[1] ** 2 / (m - 1))


def read_sigmas(value: Any, name: str) -> tuple[float, float]:
    """Return one sigma for both samples, or one for each."""
    if isinstance(value, list | tuple) or (isinstance(value, str) and " and " in value.lower()):
        first, second = read_pair(read_number, "0.4 and 0.6")(value, name)
        return first, second
    both = read_number(value, name)
    return both, both


def write_sigmas(sigmas: tuple[float, float]) -> str:
    """Return the sigmas as plan text writes them."""
    return write_number(sigmas[0]) if sigmas[0] == sigmas[1] else write_pair(sigmas)


class TwoMeansKind(TwoMeasuredKind):
    """Tests of two means."""

    test = "welch"
    parameters = (
        Measure("mean1", "mean of the first sample", _UNIT, -math.inf, math.inf),
        Measure("mean2", "mean of the second sample", _UNIT, -math.inf, math.inf),
    )
    grammar = Grammar(
        kind="two means",
        head="two means",
        marker="n",
        design=TwoMeans,
        fields=(
            Field(
                "n",
                read_pair(lambda text, name: read_whole(text, name, 2, MOST_EACH), "12 and 15"),
                write_pair,
                REQUIRED,
            ),
            Field("planning-sigma", read_sigmas, write_sigmas, REQUIRED),
            Field("test", lambda text, name: read_choice(text, name, TESTS), str, REQUIRED),
        ),
        order=("n", "planning-sigma", "claim", "alpha", "test", "verdict"),
        wording=Wording(
            title="means of two samples compared",
            sample="Measure {n} items, drawn at random from the two; take mean and s of either.",
            found="t",
            assumptions=(
                "Every item is drawn at random and measured independently of the others.",
                "Single values are about normal, or the samples are large and without far outliers.",
                "The planning sigma is about right: the power depends on it.",
                "The samples are independent of each other and measured in the same way.",
            ),
        ),
        extra="planning_sigma",
        least=2,
        **derived_fields(),
    )

    def ends(self, plan: Plan) -> dict[str, float]:
        """Return the critical values of t; Welch's depend on the variances found, here the planned ones."""
        design = plan.design
        df = design.estimate(*(sigma**2 for sigma in design.planning_sigma))[1]
        return {end: float(student_quantile(end_alpha(plan), df, end)) for end in ENDS[side_of(plan)]}

    def chance(self, plan: Plan, within: bool, rates: tuple[Floats, ...]) -> Floats:
        """Return the chance to reject, or not to, averaged over the share of the first sum of squares."""
        delta = (rates[1] - rates[0]) / plan.design.error
        return np.array([_averaged(plan, within, float(one)) for one in delta.ravel()]).reshape(delta.shape)

    def size(self, plan: Plan) -> float:
        """Return the power where the means are equal, at the planning sigmas."""
        return float(self.chance(plan, False, (np.zeros(1), np.zeros(1)))[0])

    def read_one(self, value: Any) -> tuple[float, ...]:
        """Return mean and standard deviation of a sample."""
        return self.figures(value, "mean", "s")

    def statistic(self, plan: Plan, observed: Any) -> float:
        """Return the difference in estimated standard errors."""
        (first, s1), (second, s2) = observed
        return float((second - first) / plan.design.estimate(s1**2, s2**2)[0])

    def outcome(self, plan: Plan, observed: Any) -> bool:
        """Tell whether the p-value, with the degrees of freedom found, is at most alpha."""
        return self.p_value(plan, observed) <= alpha_of(plan)

    def p_value(self, plan: Plan, observed: Any) -> float:
        """Return the tail of t with the degrees of freedom that the variances found give."""
        (_, s1), (_, s2) = observed
        df, t = float(plan.design.estimate(s1**2, s2**2)[1]), self.statistic(plan, observed)
        tails = {"above": float(student_at_least(t, df)), "below": float(student_at_most(t, df))}
        side = side_of(plan)
        return min(1.0, 2 * min(tails.values())) if side == "either" else tails[side]

    def tails(self, plan: Plan, statistic: float) -> dict[str, float]:
        """Return the tails at the planned degrees of freedom."""
        df = plan.design.estimate(*(sigma**2 for sigma in plan.design.planning_sigma))[1]
        return {"low": float(student_at_most(statistic, df)), "high": float(student_at_least(statistic, df))}

    def region(self, plan: Plan) -> str:
        """Return the critical values of t, at the planned degrees of freedom for Welch's test."""
        signs, about = {"low": "≤", "high": "≥"}, "t" if plan.design.test == "t" else "about t"
        return " or ".join(f"{about} {signs[end]} {x:.6g}" for end, x in self.ends(plan).items())

    def remarks(self, plan: Plan) -> list[str]:
        """Say which test it is, and how far its size can be trusted."""
        if plan.design.test == "t":
            return [
                "Test: pooled t. It assumes equal sigmas: with unequal ones its size may be far from alpha."
            ]
        return [
            "Test: Welch's t, degrees of freedom from the variances found. Its size is only about alpha; "
            "the one said here is the true one at the planning sigmas."
        ]


def _averaged(plan: Plan, within: bool, delta: float) -> float:
    """Return a chance at a difference of means in true standard errors."""
    design = plan.design
    free = design.n[0] - 1, design.n[1] - 1
    total, side, share_of_alpha = sum(free), side_of(plan), end_alpha(plan)

    def chance(share: Floats) -> Any:
        variances = [
            part * total * sigma**2 / df
            for part, sigma, df in zip((share, 1 - share), design.planning_sigma, free, strict=True)
        ]
        estimated, df = design.estimate(*variances)
        critical = student_quantile(share_of_alpha, df, "high") * estimated / design.error
        if side == "above":
            return (student_at_most if within else student_at_least)(critical, total, delta)
        if side == "below":
            return (student_at_least if within else student_at_most)(-critical, total, delta)
        low, high = student_at_most(-critical, total, delta), student_at_least(critical, total, delta)
        if not within:
            return low + high
        return np.where(
            delta < 0,
            student_at_least(-critical, total, delta) - high,
            student_at_most(critical, total, delta) - low,
        )

    if design.test == "t" and design.planning_sigma[0] == design.planning_sigma[1]:
        return float(chance(np.array([free[0] / total]))[0])
    return mean_over_share(*free, chance)


TWO_MEANS = register(TwoMeansKind())
