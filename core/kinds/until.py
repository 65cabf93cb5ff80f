"""Inspection until a number of defectives is found: the fewer items that takes, the worse the process.

The statistic is the number of items inspected, the last defective included (Haldane's inverse sampling; with
one defective the geometric law). It is at most m exactly when m items hold at least so many defectives, so
tails, critical values and limits are those of the binomial law.

Nothing is lost by stopping before the last defective is found, as soon as the number of items has decided.

References
----------
J. B. S. Haldane, Biometrika 33 (1945), 222-225 (from memory).
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core import algebra, native, tails
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, claim_of, register
from steelyard.core.kinds.binomial import MOST_ITEMS, BinomialLaw
from steelyard.core.law import Law
from steelyard.core.need import Need
from steelyard.core.numbers import read_whole, write_number
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import Claim, Plan, Reject
from steelyard.core.priors import BetaPrior, Prior
from steelyard.core.requirements import Requirements
from steelyard.core.splits import FALLING_ENDS, ONE_SIDED, Tail, Truth, compare, first_whole, within
from steelyard.core.threshold import ThresholdKind, threshold_fields
from steelyard.core.walk import Look

MOST_DEFECTIVES = 10_000
_BINOMIAL = BinomialLaw()
_OBSERVED = re.compile(r"(\d+) inspected (\d+) found")


@dataclass(frozen=True, slots=True)
class Until:
    """Items are inspected until so many defectives are found."""

    until: int

    def __post_init__(self) -> None:
        if not 1 <= self.until <= MOST_DEFECTIVES:
            raise InvalidValue("until", f"name from 1 to {MOST_DEFECTIVES} defectives", self.until)


@dataclass(frozen=True, slots=True)
class Run:
    """What was seen: items inspected, and defectives found among them."""

    inspected: int
    found: int


class UntilLaw(Law):
    """Items inspected until the last of so many defectives, at the defect rate p."""

    statistic, step = "inspected", 1

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(inspected <= x): x items hold enough defectives."""
        return tails.binomial_at_least(columns["until"], np.clip(x, 0.0, MOST_ITEMS), rates[0])

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(inspected >= x): one item less holds too few."""
        few = tails.binomial_at_most(
            columns["until"] - 1, np.clip(np.asarray(x) - 1.0, 0.0, MOST_ITEMS), rates[0]
        )
        return np.asarray(np.where(np.isposinf(x), 0.0, few))

    def support(self, design: Any) -> tuple[float, float]:
        """Return the defectives, and infinity."""
        return design.until, math.inf

    def critical(self, columns: Columns, rate: Floats, alpha: Any, end: str, split: str) -> Floats:
        """Return the critical numbers of items, ties with alpha decided exactly."""
        wanted, weight = np.asarray(columns["until"], dtype=float), _weight(split)

        def seldom(n: Floats) -> Any:
            return within(
                _BINOMIAL, {"n": np.minimum(n, MOST_ITEMS)}, rate, _tails(wanted, weight, end), alpha
            )

        if end == "low":
            low = first_whole(lambda n: ~seldom(n) | (n > MOST_ITEMS), wanted) - 1
            return np.asarray(np.where(low >= wanted, low, np.nan))
        most = first_whole(lambda n: seldom(n) | (n >= MOST_ITEMS), wanted)
        return np.where(seldom(most), most + 1, np.nan)

    def p_value(self, columns: Columns, rate: Floats, x: Floats, side: str, split: str) -> Floats:
        """Return the chance of so few items (side ``"above"``), of so many, or twice the smaller one."""
        few, many = self.at_most(x, columns, rate), self.at_least(x, columns, rate)
        if side != "either":
            return few if side == "above" else many
        return np.asarray(np.minimum(1.0, _weight(split) * np.minimum(few, many)))

    def nested(
        self, columns: Columns, rate: Floats, low: float | None, high: float | None, split: str
    ) -> bool:
        """Tell whether every number of items that is rejected has a smaller p-value than any that is not."""
        if low is None or high is None:
            return False
        x = np.array([low, high, low + 1, high - 1])
        p = self.p_value(columns, rate, x, "either", split)
        return bool(p[:2].max() < p[2:].min())


def _weight(split: str) -> int:
    """Return how many times a tail counts."""
    if split not in (ONE_SIDED, "half"):
        raise InvalidValue("split", "be half for a plan that inspects until it has found enough", split)
    return 1 if split == ONE_SIDED else 2


def _tails(wanted: Floats, weight: int, end: str) -> list[Tail]:
    """Return a tail of the items inspected as one of the defectives among n items."""
    return [(weight, "high", wanted) if end == "low" else (weight, "low", wanted - 1)]


def _write_until(wanted: int) -> str:
    return f"{wanted} defective{'s' if wanted > 1 else ''}"


def _read_until(value: Any, name: str) -> int:
    """Return the number of ``3 defectives``."""
    text = str(value).lower().strip()
    for word in ("defectives", "defective"):
        text = text.removesuffix(word)
    return read_whole(text.strip(), name, 1, MOST_DEFECTIVES)


class UntilKind(ThresholdKind):
    """Plans that inspect until a number of defectives is found."""

    law: Law = UntilLaw()
    ends = FALLING_ENDS
    parameters = (Parameter("p", "defect rate", "proportion between 0 and 1", 0.0, 1.0),)
    grammar = Grammar(
        kind="until",
        head="until",
        marker="until",
        design=Until,
        fields=(Field("until", _read_until, _write_until, REQUIRED),),
        order=("until", "claim", "alpha", "reject", "verdict"),
        wording=Wording(
            title="items inspected until so many are defective",
            sample="Inspect items drawn at random, one after the other, until {until} are defective, and "
            "count the items inspected. Stop earlier if their number has already decided.",
            found="items inspected",
            assumptions=(
                "Every item is drawn at random and has the same chance of being chosen.",
                "Items are defective independently of each other, at one rate.",
                "The lot is at least ten times the number inspected, or the claim is about the process.",
                "Inspection finds every defective and condemns no good item.",
            ),
        ),
        extent="until",
        **threshold_fields("inspected", whole=True),
    )

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Reject:
        """Return the largest region that keeps alpha.

        Raises
        ------
        InvalidValue
            When no number of items would be rejected, naming how many defectives are needed.
        """
        low, high = self._critical_ends(design, claim, alpha, split)
        if low is None and high is None:
            least = math.log(alpha) / math.log(claim.value) if 0 < claim.value < 1 else math.inf
            hint = f"about {math.ceil(least)} defectives are needed" if math.isfinite(least) else ""
            rule = f"let some number of items reject {claim} at alpha {write_number(alpha)}"
            raise InvalidValue("until", rule, design.until, hint)
        return Reject(low, high)

    def average_amount(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the expected items inspected until the plan decides, which it does at some number."""
        wanted, rate = columns["until"], rates[0]
        last = np.where(np.isnan(columns["high"]), columns["low"], columns["high"] - 1)
        enough = tails.binomial_at_least(wanted + 1, last + 1, rate)
        found = np.divide(wanted * enough, rate, out=np.zeros(enough.shape), where=rate > 0)
        return found + last * tails.binomial_at_most(wanted - 1, last, rate)

    def told(self, plan: Plan) -> str:
        """Return in words which numbers of items reject the claim."""
        low, high = plan.rule.low, plan.rule.high
        few = "" if low is None else f"{low:g} or fewer items inspected"
        return ", or ".join(filter(None, [few, "" if high is None else f"{high:g} or more items inspected"]))

    def read_observed(self, value: Any, plan: Plan) -> Run:
        """Return what was seen, from ``40 inspected 3 found`` or the items alone if all were found."""
        wanted = plan.design.until
        match = _OBSERVED.fullmatch(" ".join(str(value).lower().split()))
        if isinstance(value, str) and "inspected" in value.lower():
            if match is None:
                raise InvalidValue("observed", "have the form 40 inspected 3 found", value)
            inspected, found = read_whole(match[1], "observed", 1, MOST_ITEMS), int(match[2])
        else:
            inspected, found = read_whole(value, "observed", wanted, MOST_ITEMS), wanted
        if not found <= min(wanted, inspected):
            raise InvalidValue("observed", f"have at most {wanted} found, and no more than inspected", value)
        return Run(inspected, found)

    def outcome(self, plan: Plan, observed: Run) -> bool | str:
        """Tell whether the claim is rejected, or that inspection goes on."""
        if observed.found == plan.design.until:
            return super().outcome(plan, observed.inspected)
        low, high = plan.rule.low or 0, plan.rule.high or math.inf
        if observed.inspected >= high - 1:
            return True
        if observed.inspected >= low and math.isinf(high):
            return False
        return "go on inspecting"

    def p_value(self, plan: Plan, observed: Run) -> float:
        """Return the p-value of the items inspected."""
        return super().p_value(plan, self._complete(plan, observed))

    def limit(self, plan: Plan, observed: Run, end: str, miss: float) -> float:
        """Return the binomial limit of which the same items, or one less, are evidence."""
        inspected, found = self._complete(plan, observed), plan.design.until
        miss = miss / 2 if claim_of(plan).side == "either" else miss
        items, defectives = (inspected, found) if end == "lower" else (inspected - 1, found - 1)
        return _BINOMIAL.limit({"n": items}, defectives, end, miss, ONE_SIDED) if items else 1.0

    @staticmethod
    def _complete(plan: Plan, observed: Run) -> int:
        if observed.found < plan.design.until:
            message = f"no p-value or limit before {plan.design.until} defectives are found"
            raise NoAnswer(message)
        return observed.inspected

    def prior(self, plan: Plan, a: float, b: float) -> Prior:
        """Return a beta law of the defect rate."""
        del plan
        return BetaPrior(a, b)

    def paths(self, plan: Plan) -> Sequence[tuple[Sequence[Look], bool]]:
        """Return how many defectives among a number of items tell that it was reached, or not."""
        rule, wanted, found = plan.rule, plan.design.until, []
        if rule.low is not None:
            found.append(((Look(rule.low, wanted - 1, wanted),), True))
        if rule.high is not None:
            found.append(((Look(rule.high - 1, wanted - 1, wanted),), False))
        return found

    def algebra(self, plan: Plan) -> str | None:
        """Return the power of a plan that rejects few items."""
        rule = plan.rule
        if rule.high is not None:
            return None
        return algebra.binomial_power(int(rule.low), Reject(None, plan.design.until))

    def native(self, plan: Plan, cell: str) -> str:
        """Return the tails as those of the defectives among so many items."""
        rule, wanted, parts = plan.rule, plan.design.until, []
        if rule.low is not None:
            parts.append(native.binomial_native(int(rule.low), Reject(None, wanted), cell))
        if rule.high is not None:
            parts.append(native.binomial_native(int(rule.high) - 1, Reject(wanted - 1, None), cell))
        return "+".join(parts)

    def smallest_amount(self, need: Need, lasting: bool) -> float:
        """Return the first number of defectives that meets a one-sided need, or the lasting one.

        Behind some number, by Chernoff's bound, every other one meets it; up to there all are looked at.
        """
        if need.claim.side == "either":
            message = "the smallest plan that inspects until it has found enough is sought for one side only"
            raise NoAnswer(message)
        claim, catch, alpha, power = (
            np.array([x]) for x in (need.claim.value, need.catches[0], need.alpha, need.power)
        )
        last = Requirements(_BINOMIAL, {}, need.claim.side, claim, catch, alpha, power).last_counts()[0] + 1
        wanted = np.arange(1.0, min(last, MOST_DEFECTIVES) + 1)
        met = self._meets(need, wanted)
        if not met.any() or (lasting and not met[-1]):
            return math.nan
        return float(wanted[~met].max(initial=0.0) + 1 if lasting else wanted[met][0])

    def _meets(self, need: Need, wanted: Floats) -> Truth:
        """Tell with which numbers of defectives the plan reaches its power; a tie does."""
        (end,) = self.ends[need.claim.side]
        claim, catch = np.asarray(need.claim.value), np.asarray(need.catches[0])
        critical = self.law.critical({"until": wanted}, claim, need.alpha, end, ONE_SIDED)
        items = np.nan_to_num(critical if end == "low" else critical - 1)
        reached = compare(_BINOMIAL, {"n": items}, catch, _tails(wanted, 1, end), need.power) >= 0
        return reached & ~np.isnan(critical)


UNTIL = register(UntilKind())
