"""Two samples of units with defects on them, and whether their rates differ.

Given the total, the defects in the second sample are binomial, at equal rates with its share of the units;
that conditional test is exact at every total. Its power is the mean of the conditional powers over the
total, which is Poisson: summed but for a mass below 1e-30 at either end, so that this is the absolute error
of a power, beside a relative one of 1e-10.

The size is alpha itself, as a supremum: no total rejects with a greater chance, and with many defects the
steps of the counts vanish.

References
----------
J. Przyborowski and H. Wilenski, Biometrika 31 (1940), 313-323 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from steelyard.core.comparing import (
    ComparingKind,
    Derived,
    Pairing,
    alpha_of,
    derived_fields,
    read_pair,
    read_versus,
    side_of,
    write_pair,
)
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.kinds.binomial import BINOMIAL
from steelyard.core.numbers import read_number, read_whole
from steelyard.core.observed import MOST_COUNTED
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import Claim, Plan
from steelyard.core.pmf import poisson_pmf
from steelyard.core.splits import ENDS, ONE_SIDED

MOST_EXPECTED = 5_000  # defects in either sample: more would keep a cell waiting
_MOST_UNITS = 1_000_000_000
_WIDE, _MORE = 12.0, 60.0  # standard deviations, and counts besides, beyond which less than 1e-30 lies
_SPLITS = ("half", "rarest")
_UNIT = "defects per unit"


@dataclass(frozen=True, slots=True)
class TwoUnits:
    """`units` of either sample, on which defects are counted."""

    units: tuple[float, float]

    def __post_init__(self) -> None:
        if not all(0 < units <= _MOST_UNITS for units in self.units):
            rule = f"name two numbers above 0 and at most {_MOST_UNITS}"
            raise InvalidValue("units", rule, write_pair(self.units))

    @property
    def share(self) -> float:
        """The share of the second sample in all units."""
        return self.units[1] / sum(self.units)


class DefectRate(Parameter):
    """Defects per unit of one of the samples, named in the order of the samples."""

    __slots__ = ()

    def read(self, value: Any, design: Any = None) -> float:
        """Return a rate; refuse one at which more defects are expected than can be summed over."""
        rate = super().read(value, design)
        units = design.units[int(self.symbol[-1]) - 1] if design is not None else 0.0
        if rate * units > MOST_EXPECTED:
            raise InvalidValue(self.symbol, f"let at most {MOST_EXPECTED} defects be expected", value)
        return rate

    def convert(self, values: Floats, columns: Columns) -> Floats:
        """Return queried rates, NaN where they are refused."""
        units = columns[("first", "second")[int(self.symbol[-1]) - 1]]
        return np.where(self.allowed(values) & (values * units <= MOST_EXPECTED), values, np.nan)


class TwoPoissonKind(ComparingKind):
    """Tests of two rates of defects."""

    most = 1_000_000
    parameters = (
        DefectRate("rate1", "defects per unit of the first sample", _UNIT, 0.0, math.inf),
        DefectRate("rate2", "defects per unit of the second sample", _UNIT, 0.0, math.inf),
    )
    grammar = Grammar(
        kind="two poisson",
        head="two poisson",
        marker="units",
        design=TwoUnits,
        fields=(Field("units", read_pair(read_number, "100 and 120"), write_pair, REQUIRED),),
        order=("units", "claim", "alpha", "split", "verdict"),
        wording=Wording(
            title="defects per unit of two samples compared",
            sample="Inspect {units} units, drawn at random from the two, and count the defects on either.",
            found="defects",
            assumptions=(
                "Every unit is drawn at random and has the same chance of being chosen.",
                "Defects occur independently of each other, at one rate within each sample.",
                "The samples are independent of each other.",
                "Inspection is the same for both and finds every defect.",
            ),
        ),
        extent="units",
        **derived_fields(),
    )

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return the units of either sample, and the plans themselves, whose critical counts are kept."""
        kept = np.empty(len(plans), dtype=object)
        kept[:] = plans
        first, second = (np.array([plan.design.units[i] for plan in plans]) for i in (0, 1))
        verdicts = np.array([plan.verdict == "pass" for plan in plans])
        return {"plan": kept, "first": first, "second": second, "pass": verdicts}

    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the mean chance to reject over the total."""
        return _mean(BINOMIAL.reject, columns, rates)

    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the mean chance not to reject over the total."""
        return _mean(BINOMIAL.accept, columns, rates)

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Derived:
        """Return the rule, which is not written: with enough defects some pair is always rejected."""
        del design, claim, alpha
        if split not in _SPLITS:
            raise InvalidValue("split", "be half or rarest", split)
        return Derived()

    def size(self, plan: Plan) -> float:
        """Return alpha: what the power approaches as the rate of both samples grows, and never exceeds."""
        return alpha_of(plan)

    def read_observed(self, value: Any, plan: Plan) -> tuple[int, int]:
        """Return two observed counts, such as ``3 vs 9``."""
        del plan
        found = read_versus(value, read_whole, "3 vs 9")
        for count in found:
            read_whole(count, "observed", 0, MOST_COUNTED)
        return found

    def outcome(self, plan: Plan, observed: tuple[int, int]) -> bool:
        """Tell whether the pair rejects the claim."""
        ends = _critical(plan, np.array([float(sum(observed))]))
        return bool(observed[1] <= ends["low"][0] or observed[1] >= ends["high"][0])

    def p_value(self, plan: Plan, observed: tuple[int, int]) -> float:
        """Return the p-value of the second count, given the total."""
        row, side = {"n": np.asarray(float(sum(observed)))}, side_of(plan)
        share = np.asarray(plan.design.share)
        return float(BINOMIAL.law.p_value(row, share, np.asarray(float(observed[1])), side, plan.split))

    def smallest_first(self, wanted: Pairing) -> int | None:
        """Return the least units of the first sample: found by halving, then the last fifth tried in turn.

        The power is nearly monotone: its saw teeth are smoothed by the total, which is random.
        """
        found = super().smallest_first(wanted)
        if found is None or not super().reaches(wanted, found):
            return None
        before = range(max(1, found - 50, math.floor(0.8 * found)), found)
        return next((units for units in before if self.reaches(wanted, units)), found)

    def reaches(self, wanted: Pairing, first: int) -> bool:
        """Tell whether so many units have the power; beyond the domain they have."""
        units = wanted.sized(first).units
        expected = max(n * rate for n, rate in zip(units, wanted.truth, strict=True))
        return expected > MOST_EXPECTED or super().reaches(wanted, first)

    def region(self, plan: Plan) -> str:
        """Return from which second counts on the claim is rejected, for small totals."""
        totals = np.arange(200.0)
        ends, lines = _critical(plan, totals), []
        for total, low, high in zip(totals, ends["low"], ends["high"], strict=True):
            parts = [f"≤ {low:.0f}"] if low >= 0 else []
            parts += [f"≥ {high:.0f}"] if high <= total else []
            if parts:
                lines.append(f"x2 {' or '.join(parts)} of {total:.0f}")
            if len("; ".join(lines)) > 150:
                break
        return "; ".join([*lines, "…"])

    def told(self, plan: Plan) -> str:
        """Return how counts are judged, with examples, in words."""
        return f"counts of both such as {self.region(plan)[:110].rpartition('; ')[0]}"

    def remarks(self, plan: Plan) -> list[str]:
        """Say which test it is."""
        told = ["Test: given the total, the second count is binomial: exact whatever the common rate."]
        if side_of(plan) == "either":
            told.append(f"Two-sided: split {plan.split} of the conditional binomial test.")
        return told


def _critical(plan: Plan, totals: Floats) -> Columns:
    """Return for each total the second counts up to which, and from which on, the claim is rejected."""
    side, law, share = side_of(plan), BINOMIAL.law, np.asarray(plan.design.share)
    split = plan.split if side == "either" else ONE_SIDED
    ends = {"n": totals, "low": np.full(totals.shape, np.nan), "high": np.full(totals.shape, np.nan)}
    for end in ENDS[side]:
        ends[end] = law.critical({"n": totals}, share, alpha_of(plan), end, split)
    if "low" in ENDS[side]:
        ends["low"] = np.nan_to_num(ends["low"], nan=-1.0)
    if "high" in ENDS[side]:
        ends["high"] = np.where(np.isnan(ends["high"]), totals + 1, ends["high"])
    return ends


@lru_cache(maxsize=64)
def _kept(plan: Plan, most: int) -> Columns:
    return _critical(plan, np.arange(most + 1.0))


def _mean(question: Any, columns: Columns, rates: tuple[Floats, ...]) -> Floats:
    """Return the mean of a conditional chance over the total."""
    plans, *means = np.broadcast_arrays(
        columns["plan"], columns["first"] * rates[0], columns["second"] * rates[1]
    )
    found = np.empty(plans.shape)
    flat: list[Plan] = plans.ravel().tolist()
    for place, plan in enumerate(flat):
        found.flat[place] = _mean_at(question, plan, *(float(mean.flat[place]) for mean in means))
    return found


def _mean_at(question: Any, plan: Plan, first: float, second: float) -> float:
    mean = first + second
    wide = _WIDE * math.sqrt(mean) + _MORE
    least, most = max(0, math.floor(mean - wide)), math.ceil(mean + wide)
    kept = _kept(plan, 1 << max(most.bit_length(), 8))
    ends = {name: column[least : most + 1] for name, column in kept.items()}
    chances = question(ends, np.asarray(second / mean if mean else 0.5))
    return min(float((poisson_pmf(ends["n"], np.asarray(mean)) * chances).sum()), 1.0)


TWO_POISSON = register(TwoPoissonKind())
