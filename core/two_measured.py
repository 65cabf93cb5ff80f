"""What plans that compare two samples of a measurement have in common."""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.comparing import ComparingKind, Derived, alpha_of, read_versus, side_of, write_pair
from steelyard.core.errors import InvalidValue
from steelyard.core.observed import read_measured
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Claim, Plan

MOST_EACH = 1_000


@dataclass(frozen=True, slots=True)
class TwoMeasured:
    """`n` items measured in either sample."""

    n: tuple[int, int]

    def __post_init__(self) -> None:
        if not all(2 <= items <= MOST_EACH for items in self.n):
            raise InvalidValue("n", f"name two whole numbers from 2 to {MOST_EACH}", write_pair(self.n))


def end_alpha(plan: Plan) -> float:
    """Return what one end has of alpha."""
    return alpha_of(plan) / 2 if side_of(plan) == "either" else alpha_of(plan)


class TwoMeasuredKind(ComparingKind):
    """A kind that compares a statistic of two measured samples with critical values."""

    most = MOST_EACH

    @abstractmethod
    def ends(self, plan: Plan) -> dict[str, float]:
        """Return the critical values, by the end ``"low"`` or ``"high"``."""

    @abstractmethod
    def chance(self, plan: Plan, within: bool, rates: tuple[Floats, ...]) -> Floats:
        """Return the chance to reject, or with `within` not to, at arrays of true values."""

    @abstractmethod
    def read_one(self, value: Any) -> tuple[float, ...]:
        """Return what was observed of one sample."""

    @abstractmethod
    def statistic(self, plan: Plan, observed: Any) -> float:
        """Return the statistic of what was observed."""

    @abstractmethod
    def tails(self, plan: Plan, statistic: float) -> dict[str, float]:
        """Return the chances of what is no greater, and no smaller, where the claim is just true."""

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return the plans themselves."""
        kept = np.empty(len(plans), dtype=object)
        kept[:] = plans
        return {"plan": kept, "pass": np.array([plan.verdict == "pass" for plan in plans])}

    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance to reject."""
        return self._each(columns["plan"], False, rates)

    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance not to reject, accurate where it is small."""
        return self._each(columns["plan"], True, rates)

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Derived:
        """Return the rule, which is not written; two-sided tests have equal tails."""
        del design, claim, alpha
        if split != "half":
            raise InvalidValue("split", "be half for a measurement", split)
        return Derived()

    def read_observed(self, value: Any, plan: Plan) -> Any:
        """Return what was observed of both samples, such as ``mean 10.1 s 0.2 vs mean 10.4 s 0.3``."""
        del plan
        return read_versus(
            value, lambda text, name: self.read_one(text), "mean 10.1 s 0.2 vs mean 10.4 s 0.3"
        )

    def outcome(self, plan: Plan, observed: Any) -> bool:
        """Tell whether the statistic rejects the claim."""
        found, ends = self.statistic(plan, observed), self.ends(plan)
        return bool(found <= ends.get("low", -np.inf) or found >= ends.get("high", np.inf))

    def p_value(self, plan: Plan, observed: Any) -> float:
        """Return the tail beyond the statistic, or twice the smaller one."""
        tails = self.tails(plan, self.statistic(plan, observed))
        side = side_of(plan)
        if side == "either":
            return min(1.0, 2 * min(tails.values()))
        return tails["high" if side == "above" else "low"]

    @staticmethod
    def figures(value: Any, *names: str) -> tuple[float, ...]:
        """Return the named figures of one sample."""
        return read_measured(value, *names)

    def _each(self, plans: Any, within: bool, rates: tuple[Floats, ...]) -> Floats:
        plans, *spread = np.broadcast_arrays(plans, *rates)
        found = np.empty(plans.shape)
        for plan in dict.fromkeys(plans.ravel().tolist()):
            places = np.array([one == plan for one in plans.ravel().tolist()]).reshape(plans.shape)
            found[places] = self.chance(plan, within, tuple(rate[places] for rate in spread))
        return np.clip(found, 0.0, 1.0)
