"""Two samples of a measurement, and whether their standard deviations differ: the F test.

The statistic is ``F = (s2/s1)**2``. Relative error of power at most 1e-10 for 2 to 1,000 items each and
powers from 1e-100. Two-sided: equal tails.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from steelyard.core.comparing import alpha_of, derived_fields, read_pair, side_of, write_pair
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.measured import Measure
from steelyard.core.numbers import read_whole
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan
from steelyard.core.splits import ENDS
from steelyard.core.tails_two import f_at_least, f_at_most, f_quantile
from steelyard.core.two_measured import MOST_EACH, TwoMeasured, TwoMeasuredKind, end_alpha

_UNIT = "unit of the measurement"


class TwoSpreadsKind(TwoMeasuredKind):
    """Tests of two standard deviations."""

    parameters = (
        Measure("sigma1", "standard deviation of the first sample", _UNIT, 0.0, math.inf, lower_open=True),
        Measure("sigma2", "standard deviation of the second sample", _UNIT, 0.0, math.inf, lower_open=True),
    )
    grammar = Grammar(
        kind="two spreads",
        head="two spreads",
        marker="n",
        design=TwoMeasured,
        fields=(
            Field(
                "n",
                read_pair(lambda text, name: read_whole(text, name, 2, MOST_EACH), "12 and 15"),
                write_pair,
                REQUIRED,
            ),
        ),
        order=("n", "claim", "alpha", "verdict"),
        wording=Wording(
            title="standard deviations of two samples compared",
            sample="Measure {n} items, drawn at random from the two; take the standard deviation of either.",
            found="F = (s2/s1)^2",
            assumptions=(
                "Every item is drawn at random and measured independently of the others.",
                "Single values are normal: this test is sensitive to outliers and skew.",
                "The samples are independent of each other and measured in the same way.",
            ),
        ),
        least=2,
        **derived_fields(),
    )

    def ends(self, plan: Plan) -> dict[str, float]:
        """Return the critical values of F."""
        under, over = (items - 1 for items in plan.design.n)
        share = end_alpha(plan)
        return {end: float(f_quantile(share, over, under, end)) for end in ENDS[side_of(plan)]}

    def chance(self, plan: Plan, within: bool, rates: tuple[Floats, ...]) -> Floats:
        """Return the chance to reject, or not to."""
        under, over = (items - 1 for items in plan.design.n)
        scale, ends = (rates[0] / rates[1]) ** 2, self.ends(plan)
        below = f_at_most(scale * ends.get("low", 0.0), over, under)
        if not within:
            above = f_at_least(scale * ends["high"], over, under) if "high" in ends else 0.0
            return np.asarray(below + above)
        if "high" not in ends:
            return f_at_least(scale * ends["low"], over, under)
        left = f_at_most(scale * ends["high"], over, under) - below
        right = f_at_least(scale * ends.get("low", 0.0), over, under)
        beyond = f_at_least(scale * ends["high"], over, under)
        return np.asarray(np.where(right < 0.5, right - beyond, left))

    def size(self, plan: Plan) -> float:
        """Return alpha, which is reached wherever both standard deviations are equal."""
        return alpha_of(plan)

    def read_one(self, value: Any) -> tuple[float, ...]:
        """Return the standard deviation of a sample."""
        return self.figures(value, "s")

    def statistic(self, plan: Plan, observed: Any) -> float:
        """Return F."""
        (first,), (second,) = observed
        return float((second / first) ** 2)

    def tails(self, plan: Plan, statistic: float) -> dict[str, float]:
        """Return the chances of so small, and of so large, an F."""
        under, over = (items - 1 for items in plan.design.n)
        low, high = f_at_most(statistic, over, under), f_at_least(statistic, over, under)
        return {"low": float(low), "high": float(high)}

    def region(self, plan: Plan) -> str:
        """Return the critical values of F = (s2/s1)²."""
        signs = {"low": "≤", "high": "≥"}
        return " or ".join(f"F {signs[end]} {x:.8g}" for end, x in self.ends(plan).items())


TWO_SPREADS = register(TwoSpreadsKind())
