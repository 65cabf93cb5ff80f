"""Life tests for the mean life of units that fail at a constant rate, by the three ways to stop."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, replace
from typing import Any

from steelyard.core import native
from steelyard.core import tails_continuous as continuous
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, claim_of, register
from steelyard.core.kinds.binomial import MOST_ITEMS
from steelyard.core.kinds.failures import (
    MOST_TIME,
    ClockLaw,
    FailureTimeLaw,
    TotalTimeLaw,
    demonstration_time,
)
from steelyard.core.law import CountLaw
from steelyard.core.measured import Measure, MeasuredKind
from steelyard.core.need import Need
from steelyard.core.numbers import read_number, read_whole, write_number
from steelyard.core.plan import RELATIONS, Claim, Plan, Reject
from steelyard.core.regions import design_row, least_amount
from steelyard.core.requirements import one_sided_amount
from steelyard.core.splits import FALLING_ENDS, ONE_SIDED
from steelyard.core.threshold import ThresholdKind, threshold_fields

MOST_FAILURES = 50_000
_TURNED = {"<=": RELATIONS["below"], ">=": RELATIONS["above"], "=": "="}
_OBSERVED = re.compile(r"([\d.]+(?:e[-+]?\d+)?) h(?:ours?)? (\d+) failures?")
_LIFE = Measure("life", "mean life", "hours or cycles, as the time", 0.0, math.inf, lower_open=True)
_CONSTANT = "Units fail at a constant rate: no early failures, no wear-out within the test."
_ALIKE = (
    "The units on test are a random sample of those that matter, run under the conditions of use.",
    "Failures are noticed when they happen and are independent of each other.",
)


@dataclass(frozen=True, slots=True)
class TotalTime:
    """A test that stops at a total `time` on test, summed over all units."""

    time: float

    def __post_init__(self) -> None:
        _check_time("time", self.time)


@dataclass(frozen=True, slots=True)
class OnClock:
    """A test of `units` units, none replaced, that stops when the `clock` has run so long."""

    units: int
    clock: float

    def __post_init__(self) -> None:
        if not 1 <= self.units <= MOST_ITEMS:
            raise InvalidValue("units", f"be a whole number from 1 to {MOST_ITEMS}", self.units)
        _check_time("clock", self.clock)


@dataclass(frozen=True, slots=True)
class ToFailures:
    """A test that stops at the last of so many `failures`."""

    failures: int

    def __post_init__(self) -> None:
        if not 1 <= self.failures <= MOST_FAILURES:
            raise InvalidValue("failures", f"be a whole number from 1 to {MOST_FAILURES}", self.failures)


@dataclass(frozen=True, slots=True)
class Run:
    """What a test has shown so far: time, total or on the clock, and failures."""

    time: float
    failures: int


def _check_time(name: str, time: float) -> None:
    if not 0 < time <= MOST_TIME:
        raise InvalidValue(name, f"be greater than 0 and at most {MOST_TIME:g}", time)


def _read_run(value: Any) -> Run | None:
    """Return what ``1850 h 2 failures`` says; None for anything else."""
    match = _OBSERVED.fullmatch(" ".join(str(value).lower().split()))
    return Run(read_number(match[1], "observed"), int(match[2])) if match else None


class LifeKind(ThresholdKind):
    """What tests of a mean life have in common: rejecting a short life passes, rejecting a long one fails."""

    parameters = (_LIFE,)

    def verify(self, plan: Plan) -> None:
        """Refuse also the verdict upside down."""
        super().verify(plan)
        ends = [end for end in ("low", "high") if getattr(plan.rule, end) is not None]
        if len(ends) == 1:
            long = ends[0] in self.ends["above"]
            wanted, shows = ("pass", "a long life") if long else ("fail", "a short life")
            if plan.verdict != wanted:
                raise InvalidValue("verdict", f"be {wanted}: what is rejected shows {shows}", plan.verdict)


class FailureKind(LifeKind):
    """A life test that stops at a time and counts failures."""

    law: CountLaw
    ends = FALLING_ENDS
    limited: str

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Reject:
        """Return the largest region that keeps alpha.

        Raises
        ------
        InvalidValue
            When no number of failures would be rejected, naming the least amount with which some can be.
        """
        low, high = self._critical_ends(design, claim, alpha, split)
        if low is None and high is None:
            amount, least = self.law.amount, self.least_amount(design, claim, alpha, split)
            rule = f"be at least {least:.10g} so that some number of failures can reject {claim}"
            raise InvalidValue(amount, rule, float(getattr(design, amount)))
        return Reject(low, high)

    def least_amount(self, design: Any, claim: Claim, alpha: float, split: str) -> float:
        """Return the least amount with which some number of failures rejects."""
        row, split = design_row(self, design), split if claim.side == "either" else ONE_SIDED
        ends = self.ends[claim.side]
        return min(least_amount(self.law, row, claim.value, alpha, end, split) for end in ends)

    def read_observed(self, value: Any, plan: Plan) -> Run:
        """Return the failures of the whole test, or ``1850 h 2 failures`` of a part of it."""
        end, most = float(getattr(plan.design, self.limited)), self.law.support(plan.design)[1]
        seen = _read_run(value) or Run(end, read_whole(value, "observed", 0))
        if seen.time > end or seen.failures > most:
            few = "" if math.isinf(most) else f" and at most {most:g} failures"
            raise InvalidValue("observed", f"have a time of at most {write_number(end)}{few}", value)
        return seen

    def outcome(self, plan: Plan, observed: Run) -> bool | str:
        """Tell whether the claim is rejected, as soon as the failures have decided, or to go on."""
        low, high = plan.rule.low, plan.rule.high
        if observed.time >= getattr(plan.design, self.limited):
            return super().outcome(plan, observed.failures)
        if high is not None and observed.failures >= high:
            return True
        if high is None and observed.failures > low:
            return False
        return "go on testing"

    def p_value(self, plan: Plan, observed: Run) -> float:
        """Return the p-value of the failures of the whole test."""
        return super().p_value(plan, self._whole(plan, observed))

    def limit(self, plan: Plan, observed: Run, end: str, miss: float) -> float:
        """Return an exact confidence limit of the mean life."""
        split = plan.split if claim_of(plan).side == "either" else ONE_SIDED
        row = design_row(self, plan.design)
        return self.law.limit(row, self._whole(plan, observed), end, miss, split)

    def _whole(self, plan: Plan, observed: Run) -> int:
        if observed.time < getattr(plan.design, self.limited):
            message = "no p-value or limit before the test has ended"
            raise NoAnswer(message)
        return observed.failures

    def told(self, plan: Plan) -> str:
        """Return in words which numbers of failures reject the claim."""
        low, high = plan.rule.low, plan.rule.high
        few = "" if low is None else f"{low:g} failures or fewer" if low > 0 else "no failure"
        return ", or ".join(filter(None, [few, "" if high is None else f"{high:g} failures or more"]))

    def smallest_amount(self, need: Need, lasting: bool) -> float:
        """Return the least amount that meets a one-sided need, or the lasting one; times are any number."""
        if need.claim.side == "either":
            message = "the smallest life test is sought for one side only"
            raise NoAnswer(message)
        turned = replace(need.claim, relation=_TURNED[need.claim.relation])
        asked = replace(need, claim=turned, whole=not self.law.divisible)
        return one_sided_amount(self.law, design_row(self, need.design), asked, lasting)


class TotalTimeKind(FailureKind):
    """Life tests over a total time."""

    law, limited = TotalTimeLaw(), "time"
    grammar = Grammar(
        kind="life",
        head="life",
        marker="time",
        design=TotalTime,
        fields=(Field("time", read_number, default=REQUIRED),),
        order=("time", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="mean life, over a total time on test",
            sample="Run units, replacing what fails, for {time} in total; count failures.",
            found="failures",
            assumptions=(_CONSTANT, "Failed units are replaced, or enough others go on.", *_ALIKE),
        ),
        extent="time",
        **threshold_fields("failures", whole=True),
    )

    def least_amount(self, design: Any, claim: Claim, alpha: float, split: str) -> float:
        """Return the time in which no failure rejects; any time will do where many failures do."""
        del design, split
        return demonstration_time(claim.value, alpha, 0)

    def native(self, plan: Plan, cell: str) -> str:
        """Return the power by the spreadsheet's Poisson and gamma distributions."""
        return native.poisson_native(plan.design.time, plan.rule, f"1/{cell}")


class ClockKind(FailureKind):
    """Life tests on a fixed clock, without replacement."""

    law, limited = ClockLaw(), "clock"
    grammar = Grammar(
        kind="life clock",
        head="life",
        marker="clock",
        design=OnClock,
        fields=(
            Field("units", lambda text, name: read_whole(text, name, 1, MOST_ITEMS), default=REQUIRED),
            Field("clock", read_number, default=REQUIRED),
        ),
        order=("units", "clock", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="mean life, units on a fixed clock",
            sample="Run {units} units for {clock} each, or until they fail; replace none; count failures.",
            found="failures",
            assumptions=(_CONSTANT, *_ALIKE),
        ),
        extent="units",
        extra="clock",
        **threshold_fields("failures", whole=True),
    )

    def native(self, plan: Plan, cell: str) -> str:
        """Return the power by the spreadsheet's binomial and beta distributions."""
        fails = f"1-EXP(-{write_number(plan.design.clock)}/{cell})"
        return native.binomial_native(plan.design.units, plan.rule, fails)


class FailureTimeKind(LifeKind, MeasuredKind):
    """Life tests that stop at a failure."""

    law = FailureTimeLaw()
    most = MOST_FAILURES
    grammar = Grammar(
        kind="life failures",
        head="life",
        marker="failures",
        design=ToFailures,
        fields=(
            Field("failures", lambda text, name: read_whole(text, name, 1, MOST_FAILURES), default=REQUIRED),
        ),
        order=("failures", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="mean life, up to a number of failures",
            sample="Run units until {failures} have failed, and sum the times on test of all units.",
            found="a total time",
            assumptions=(_CONSTANT, *_ALIKE),
        ),
        extent="failures",
        **threshold_fields("time", whole=False),
    )

    def read_observed(self, value: Any, plan: Plan) -> Run:
        """Return the total time at the last failure, or ``1850 h 2 failures`` before it."""
        wanted = plan.design.failures
        seen = _read_run(value) or Run(read_number(value, "observed"), wanted)
        if seen.time <= 0 or seen.failures > wanted:
            raise InvalidValue("observed", f"have a time above 0 and at most {wanted} failures", value)
        return seen

    def outcome(self, plan: Plan, observed: Run) -> bool | str:
        """Tell whether the claim is rejected, as soon as the time has decided, or to go on."""
        if observed.failures == plan.design.failures:
            return super().outcome(plan, observed.time)
        low, high = plan.rule.low, plan.rule.high
        if high is not None and observed.time >= high:
            return True
        if high is None and observed.time > low:
            return False
        return "go on testing"

    def p_value(self, plan: Plan, observed: Run) -> float:
        """Return the p-value of the total time."""
        return super().p_value(plan, self._whole(plan, observed))

    def limit(self, plan: Plan, observed: Run, end: str, miss: float) -> float:
        """Return the mean life at which the total time has the chance `miss`."""
        tail = "low" if end == "upper" else "high"
        share = continuous.chi_square_quantile(self.tail_miss(plan, miss), 2 * plan.design.failures, tail)
        return float(2 * self._whole(plan, observed) / share)

    @staticmethod
    def _whole(plan: Plan, observed: Run) -> float:
        if observed.failures < plan.design.failures:
            message = f"no p-value or limit before {plan.design.failures} failures"
            raise NoAnswer(message)
        return observed.time

    def native(self, plan: Plan, cell: str) -> str:
        """Return the power by the spreadsheet's chi-square distribution."""
        df, low, high = 2 * plan.design.failures, plan.rule.low, plan.rule.high
        lower = "" if low is None else f"_xlfn.CHISQ.DIST(2*{write_number(low)}/{cell},{df},TRUE)"
        upper = "" if high is None else f"_xlfn.CHISQ.DIST.RT(2*{write_number(high)}/{cell},{df})"
        return "+".join(filter(None, (lower, upper)))


TOTAL_TIME, CLOCK, FAILURE_TIME = map(register, (TotalTimeKind(), ClockKind(), FailureTimeKind()))
