"""Every kind of plan that compares one statistic with limits."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from steelyard.core.endings import Endings
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import Kind, claim_of
from steelyard.core.law import CountLaw, Law
from steelyard.core.need import Need
from steelyard.core.numbers import read_number, write_number
from steelyard.core.observed import read_count
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Claim, Plan, Reject, same_rule
from steelyard.core.priors import Prior
from steelyard.core.regions import design_row, least_amount
from steelyard.core.requirements import one_sided_amount
from steelyard.core.splits import ENDS, ONE_SIDED
from steelyard.core.two_sided import two_sided_amount
from steelyard.core.walk import Look


class ThresholdKind(Kind):
    """A kind whose rule is ``x<=low or x>=high`` for one statistic x with a known law.

    Attributes
    ----------
    law : Law
    ends : mapping
        The ends of the statistic that reject, by the side where the parameter lies when the claim is false.
    """

    law: Law
    ends: Mapping[str, tuple[str, ...]] = ENDS

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return the design's fields and the rule's ends; a missing end is NaN."""
        columns = {
            field.attribute: np.array([getattr(plan.design, field.attribute) for plan in plans])
            for field in self.grammar.fields
        }
        for end in ("low", "high"):
            columns[end] = np.array([getattr(plan.rule, end) for plan in plans], dtype=float)
        columns["pass"] = np.array([plan.verdict == "pass" for plan in plans])
        return columns

    def row(self, design: Any, claim: Claim) -> Columns:
        """Return what the law needs to know of one plan, by name."""
        del claim
        return design_row(self, design)

    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        """Return P(x <= low) + P(x >= high)."""
        low, high = columns["low"], columns["high"]
        no_low, no_high = np.isnan(low), np.isnan(high)
        if no_low.all():
            return self.law.at_least(high, columns, *rates)
        if no_high.all():
            return self.law.at_most(low, columns, *rates)
        lower = self.law.at_most(np.where(no_low, -np.inf, low), columns, *rates)
        upper = self.law.at_least(np.where(no_high, np.inf, high), columns, *rates)
        return np.minimum(lower + upper, 1.0)

    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        """Return P(low < x < high), from the tails on whichever side lose the least."""
        low, high, step = columns["low"], columns["high"], self.law.step
        no_low, no_high = np.isnan(low), np.isnan(high)
        if no_low.all():
            return self.law.at_most(high - step, columns, *rates)
        if no_high.all():
            return self.law.at_least(low + step, columns, *rates)
        low, high = np.where(no_low, -np.inf, low), np.where(no_high, np.inf, high)
        below, above = (self.law.at_most(x, columns, *rates) for x in (low, high - step))
        right, beyond = (self.law.at_least(x, columns, *rates) for x in (low + step, high))
        return np.clip(np.where(above <= right, above - below, right - beyond), 0.0, 1.0)

    def average_amount(self, columns: Columns, *rates: Floats) -> Floats:
        """Return how much a plan inspects, whatever the rates."""
        amount = columns[self.grammar.extent]
        shape = np.broadcast_shapes(amount.shape, *(rate.shape for rate in rates))
        return np.broadcast_to(amount, shape).astype(float)

    def given_rule(self, rule: Reject) -> Reject:
        """Return the rule itself; counts must be whole numbers."""
        for end in (rule.low, rule.high):
            if end is not None and self.law.step and not float(end).is_integer():
                raise InvalidValue("reject", "name whole numbers", end)
        return rule

    def verify(self, plan: Plan) -> None:
        """Refuse rules that can never or always reject, or that reject on the claim's own side."""
        rule, (least, most) = plan.rule, self.law.support(plan.design)
        text = rule.text(self.law.statistic)
        if not self._possible(rule.low, least, most) or not self._possible(rule.high, least, most):
            reach = (
                f"a value from {least:g} to {most:g}" if math.isfinite(most) else f"a value from {least:g}"
            )
            raise InvalidValue("reject", f"name {reach}", text)
        if (rule.low is not None and rule.low >= most) or (rule.high is not None and rule.high <= least):
            raise InvalidValue("reject", "leave some outcome that does not reject", text)
        if rule.low is not None and rule.high is not None and rule.high - rule.low <= self.law.step:
            raise InvalidValue("reject", "leave some outcome that does not reject", text)
        if plan.claim is not None:
            self.check_claim(plan.claim, plan.design)
        side = plan.claim.side if plan.claim else "either"
        if any(getattr(rule, end) is not None for end in ENDS["either"] if end not in self.ends[side]):
            raise InvalidValue("reject", f"not lie on the side where the claim {plan.claim} is true", text)

    def rises(self, plan: Plan) -> bool:
        """Tell whether the power of a one-sided plan rises with the parameter."""
        if plan.claim is not None and plan.claim.side != "either":
            return super().rises(plan)
        (end,) = self.ends["above"]
        return getattr(plan.rule, end) is not None

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Reject:
        """Return the largest region that keeps alpha."""
        return Reject(*self._critical_ends(design, claim, alpha, split))

    def _critical_ends(
        self, design: Any, claim: Claim, alpha: float, split: str
    ) -> tuple[float | None, float | None]:
        row, rate = self.row(design, claim), np.asarray(claim.value)
        split = split if claim.side == "either" else ONE_SIDED
        found = {end: float(self.law.critical(row, rate, alpha, end, split)) for end in self.ends[claim.side]}
        low, high = found.get("low", math.nan), found.get("high", math.nan)
        return None if math.isnan(low) else low, None if math.isnan(high) else high

    def read_observed(self, value: Any, plan: Plan) -> Any:
        """Return an observed value of the statistic."""
        del plan
        return read_number(value, "observed")

    def outcome(self, plan: Plan, observed: Any) -> bool | str:
        """Tell whether the statistic rejects the claim."""
        low, high = plan.rule.low, plan.rule.high
        return bool((low is not None and observed <= low) or (high is not None and observed >= high))

    def follows_split(self, plan: Plan) -> bool:
        """Tell whether the rule is the region of the plan's alpha, or without alpha that of some level."""
        claim, rule = claim_of(plan), plan.rule
        if plan.alpha is None:
            row, rate = self.row(plan.design, claim), np.asarray(claim.value)
            return self.law.nested(row, rate, rule.low, rule.high, plan.split)
        low, high = self._critical_ends(plan.design, claim, plan.alpha, plan.split)
        return (low is not None or high is not None) and same_rule(Reject(low, high), rule)

    def p_value(self, plan: Plan, observed: Any) -> float:
        """Return the p-value of the statistic."""
        claim = claim_of(plan)
        rate, x = np.asarray(claim.value), np.asarray(observed)
        return float(self.law.p_value(self.row(plan.design, claim), rate, x, claim.side, plan.split))

    def limit(self, plan: Plan, observed: Any, end: str, miss: float) -> float:
        """Refuse: a kind that inverts its test says how."""
        del observed, end, miss
        message = f"a plan of kind {plan.kind} has no confidence limit"
        raise NoAnswer(message)

    @staticmethod
    def _possible(end: float | None, least: float, most: float) -> bool:
        return end is None or least <= end <= most


class CountKind(ThresholdKind):
    """A threshold kind whose statistic is a count."""

    law: CountLaw

    def read_observed(self, value: Any, plan: Plan) -> Any:
        """Return an observed count."""
        return read_count(value, self.law.support(plan.design)[1])

    def endings(self, plan: Plan, rate: Floats) -> Endings:
        """Return the one way to end: after the whole sample."""
        columns = self.columns([plan])
        amounts = np.array([getattr(plan.design, self.law.amount)], dtype=float)
        passing, failing = self.accept(columns, rate), self.reject(columns, rate)
        if plan.verdict == "pass":
            passing, failing = failing, passing
        return Endings(amounts, passing[None], failing[None], self.average_amount(columns, rate))

    def left(self, plan: Plan, rate: Floats, lot: float) -> Floats:
        """Return the defectives that a lot from a process keeps in what is not inspected, on average."""
        rest = lot - getattr(plan.design, self.law.amount)
        return np.asarray(rate * rest * self.passing(self.columns([plan]), rate))

    def prior(self, plan: Plan, a: float, b: float) -> Prior:
        """Return what is known of the rate."""
        return self.law.prior(plan.design, a, b)

    def paths(self, plan: Plan) -> Sequence[tuple[Sequence[Look], bool]]:
        """Return one look for each end that rejects."""
        rule, amount = plan.rule, getattr(plan.design, self.law.amount)
        high = [] if rule.high is None else [((Look(amount, int(rule.high) - 1, int(rule.high)),), True)]
        return high + (
            [] if rule.low is None else [((Look(amount, int(rule.low), int(rule.low) + 1),), False)]
        )

    def told(self, plan: Plan) -> str:
        """Return in words which counts reject the claim."""
        found, rule, ends = self.grammar.wording.found, plan.rule, []
        if rule.low is not None:
            ends.append(f"{rule.low:g} {found} or fewer" if rule.low > 0 else f"no {found}")
        if rule.high is not None:
            ends.append(f"{rule.high:g} {found} or more")
        return ", or ".join(ends)

    def limit(self, plan: Plan, observed: Any, end: str, miss: float) -> float:
        """Return an exact confidence limit of the rate."""
        split = plan.split if claim_of(plan).side == "either" else ONE_SIDED
        return self.law.limit(design_row(self, plan.design), observed, end, miss, split)

    def algebra(self, plan: Plan) -> str | None:
        """Return the power function as algebra, or None where there is none."""
        return self.law.algebra(plan.design, plan.rule)

    def native(self, plan: Plan, cell: str) -> str | None:
        """Return a formula of the spreadsheet's own functions for the power at `cell`, or None."""
        return self.law.native(plan.design, plan.rule, cell)

    def smallest_amount(self, need: Need, lasting: bool) -> float:
        """Return the first or the lasting amount that meets a need; NaN beyond the largest amount."""
        find = two_sided_amount if need.claim.side == "either" else one_sided_amount
        return find(self.law, design_row(self, need.design), need, lasting)

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Reject:
        """Return the largest region that keeps alpha.

        Raises
        ------
        InvalidValue
            When no count would be rejected, naming the smallest amount at which some can be, or all would.
        """
        low, high = self._critical_ends(design, claim, alpha, split)
        if low is None and high is None:
            raise self._too_little(design, claim, alpha, split)
        if low is not None and high is not None and high - low <= 1:
            raise InvalidValue("alpha", "leave some outcome that does not reject", alpha)
        return Reject(low, high)

    def _too_little(self, design: Any, claim: Claim, alpha: float, split: str) -> InvalidValue:
        law, row = self.law, design_row(self, design)
        split = split if claim.side == "either" else ONE_SIDED
        least = min(least_amount(law, row, claim.value, alpha, end, split) for end in ENDS[claim.side])
        if math.isinf(least):
            hint = f"no {law.amount} up to {float(law.largest(row)):.0f} is enough"
            rule = f"be one that some count can reject at alpha {write_number(alpha)}"
            return InvalidValue("claim", rule, str(claim), hint)
        rule = f"be at least {least:.0f} so that some count can reject {claim} at alpha {write_number(alpha)}"
        return InvalidValue(law.amount, rule, float(row[law.amount]))


def read_reject(texts: dict[str, str], statistic: str, whole: bool) -> Reject:
    """Return the rule that ``x<=30 or x>=50`` describes.

    Raises
    ------
    InvalidValue
        When the field is missing, has another form, or names a broken count.
    """
    example = f"{statistic}>=4" if whole else f"{statistic}>=4.5"
    text = texts.get("reject")
    if text is None:
        raise InvalidValue("reject", f"be written in the plan, e.g. reject {example}", None)
    ends: dict[str, float] = {}
    for part in text.lower().replace("≤", "<=").replace("≥", ">=").split(" or "):
        compact = part.replace(" ", "")
        relation = "<=" if "<=" in compact else ">="
        subject, _, number = compact.partition(relation)
        end = "low" if relation == "<=" else "high"
        if subject != statistic or not number or end in ends:
            both = f"{statistic}<=1 or {statistic}>=9"
            raise InvalidValue("reject", f"have the form {example} or {both}", text)
        value = read_number(number, "reject")
        if whole and not value.is_integer():
            raise InvalidValue("reject", "name whole numbers", text)
        ends[end] = value
    return Reject(ends.get("low"), ends.get("high"))


def threshold_fields(statistic: str, whole: bool) -> dict[str, Any]:
    """Return the grammar's part that is alike in every threshold kind."""
    return {
        "rules": ("reject",),
        "read_rule": lambda texts, design: read_reject(texts, statistic, whole),
        "write_rule": lambda rule: {"reject": rule.text(statistic)},
    }
