"""What plans that measure have in common: a statistic with a continuous law, and what was observed of it."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from steelyard.core.errors import InvalidValue
from steelyard.core.kind import claim_of
from steelyard.core.law import ContinuousLaw
from steelyard.core.need import Need
from steelyard.core.numbers import read_whole
from steelyard.core.parameter import Floats, Parameter
from steelyard.core.plan import Plan
from steelyard.core.splits import ENDS, ONE_SIDED, Truth, first_whole
from steelyard.core.threshold import ThresholdKind

MOST_MEASURED = 100_000


class Measure(Parameter):
    """A parameter in the unit of what is measured."""

    __slots__ = ()

    def show(self, value: float, bare: bool = False) -> str:
        """Return a value in eight digits: a mean may lie close to its claim."""
        return f"{value:.8g}" if bare else f"{value:.8g} {self.name}"


def read_items(least: int) -> Any:
    """Return a reader of a number of items to measure."""
    return lambda value, name: read_whole(value, name, least, MOST_MEASURED)


class MeasuredKind(ThresholdKind):
    """A threshold kind whose statistic is measured: its power grows with the number of items.

    Attributes
    ----------
    most : int
        The greatest amount.
    """

    law: ContinuousLaw
    most = MOST_MEASURED

    def verify(self, plan: Plan) -> None:
        """Refuse also the value that the statistic never takes: a standard deviation of 0."""
        super().verify(plan)
        least, _ = self.law.support(plan.design)
        if plan.rule.low is not None and plan.rule.low <= least:
            raise InvalidValue("reject", f"name a value above {least:g}", plan.rule.low)

    def told(self, plan: Plan) -> str:
        """Return in words what rejects the claim."""
        found, ends = self.grammar.wording.found, []
        if plan.rule.low is not None:
            ends.append(f"{found} of {plan.rule.low:.8g} or less")
        if plan.rule.high is not None:
            ends.append(f"{found} of {plan.rule.high:.8g} or more")
        return ", or ".join(ends)

    def tail_miss(self, plan: Plan, miss: float) -> float:
        """Return what one limit may miss: two joint limits share it."""
        return miss / 2 if claim_of(plan).side == "either" else miss

    def smallest_amount(self, need: Need, lasting: bool) -> float:
        """Return the least amount that meets a need, from which on it is always met; NaN where none does."""
        del lasting
        extent, most, least = self.grammar.extent, float(self.most), float(self.grammar.least)
        if not need.whole:
            raise InvalidValue(extent, "be sought as a whole number", "any real number")
        if not self._meets(need, np.asarray(most)):
            return math.nan
        return float(first_whole(lambda amount: self._meets(need, amount), np.asarray(least)))

    def _meets(self, need: Need, amount: Floats) -> Truth:
        """Tell whether the region of the need's claim and alpha has the power at every rate to catch."""
        columns = {**self.row(need.design, need.claim), self.grammar.extent: np.minimum(amount, self.most)}
        side, claim = need.claim.side, np.asarray(need.claim.value)
        split = need.split if side == "either" else ONE_SIDED
        ends = {end: self.law.critical(columns, claim, need.alpha, end, split) for end in ENDS[side]}
        tails = {"low": self.law.at_most, "high": self.law.at_least}
        rates = [np.asarray(catch) for catch in need.catches]
        powers = [[tails[end](x, columns, rate) for end, x in ends.items()] for rate in rates]
        return np.asarray(np.sum(powers, axis=1).min(axis=0) >= need.power)
