"""Acceptance by measurement, the k method: a lot passes when mean and s keep a distance from the limits.

The claim is about the fraction p outside the limits. A claim ``p<=a`` is rejected when the lot fails; a claim
``p>=a`` when it passes, which demonstrates a smaller fraction: k is then a tolerance factor.

With two limits and sigma unknown p does not fix the chance. A question may give the part of p above the upper
limit; otherwise the plan is judged at the worst split: while the claim is true by the greatest chance of
rejecting it, where it is false by the least.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from itertools import product
from typing import Any

import numpy as np

from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Kind, Wording, claim_of, register
from steelyard.core.measured import MOST_MEASURED, read_items
from steelyard.core.native_t import t_power
from steelyard.core.need import Need
from steelyard.core.numbers import read_number, write_number
from steelyard.core.observed import Sample, read_measured
from steelyard.core.parameter import Columns, Floats, Parameter, show_rate
from steelyard.core.plan import Claim, Plan
from steelyard.core.quality import Index, first_from
from steelyard.core.specification import (
    Accept,
    Limits,
    distances,
    fraction_beyond,
    quality_index,
    read_accept,
    read_sigma,
    write_accept,
    write_sigma,
)
from steelyard.core.tails_continuous import normal_quantile

VERDICTS = {"<=": "fail", ">=": "pass"}


class Fraction(Parameter):
    """The fraction outside the limits; with two limits and sigma known it has a least value."""

    __slots__ = ()

    def read(self, value: Any, design: Any = None) -> float:
        """Return a fraction from a number or text."""
        number = Parameter.read(self, value, design)
        if design is not None and number < design.index.least:
            least = show_rate(design.index.least)
            raise InvalidValue("p", f"be at least {least}, the least that these limits allow", value)
        return number

    def convert(self, values: Floats, columns: Columns) -> Floats:
        """Return fractions, NaN where they are impossible."""
        fine = self.allowed(values) & (values >= columns["least"])
        return values if fine.all() else np.where(fine, values, np.nan)

    def reach(self, design: Any) -> tuple[float, float]:
        """Return the least fraction and 1."""
        return design.index.least, 1.0

    def span(self, columns: Columns) -> tuple[Floats, Floats]:
        """Return the least fraction of each plan and 1."""
        return columns["least"], np.ones(())


class VariablesKind(Kind):
    """Acceptance by measurement."""

    parameters = (
        Fraction("p", "fraction outside the limits", "proportion between 0 and 1", 0.0, 1.0),
        Parameter("share", "part of it above the upper limit", "between 0 and 1", 0.0, 1.0, optional=True),
    )
    grammar = Grammar(
        kind="variables",
        head="variables",
        marker="n",
        design=Limits,
        fields=(
            Field("n", read_items(1), default=REQUIRED),
            Field("lower", read_number),
            Field("upper", read_number),
            Field("sigma", read_sigma, write_sigma),
        ),
        order=("n", "lower", "upper", "sigma", "accept", "claim", "alpha", "verdict"),
        rules=("accept",),
        read_rule=read_accept,
        write_rule=write_accept,
        wording=Wording(
            title="acceptance by measurement against limits",
            sample="Measure {n} items drawn at random; take the mean and the standard deviation s.",
            found="a quality index",
            assumptions=(
                "Every item is drawn at random and measured independently of the others.",
                "Single values are normal, out to the limits: check it, this test stands and falls with it.",
                "The lot comes from one stable process; sigma, where known, is that of the process.",
                "The measurement is validated: its bias and scatter are small against sigma.",
            ),
        ),
        extra="sigma",
        least=2,
    )

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return n, k, the case and the claim of every plan, NaN where it has none."""
        indices = [plan.design.index for plan in plans]
        claims = [plan.claim.value if plan.claim else math.nan for plan in plans]
        return {
            "n": np.array([plan.design.n for plan in plans], dtype=float),
            "k": np.array([plan.rule.k for plan in plans], dtype=float),
            "two": np.array([index.two for index in indices]),
            "known": np.array([index.known for index in indices]),
            "width": np.array([index.width for index in indices]),
            "least": np.array([index.least for index in indices]),
            "claim": np.array(claims, dtype=float),
            "pass": np.array([plan.verdict == "pass" for plan in plans]),
        }

    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance that the lot passes, in a demonstration, otherwise that it fails."""
        return _chance(columns, columns["pass"], True, *rates)

    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance of the opposite."""
        return _chance(columns, ~columns["pass"], False, *rates)

    def average_amount(self, columns: Columns, *rates: Floats) -> Floats:
        """Return n, whatever the rates."""
        return np.broadcast_to(
            columns["n"], np.broadcast_shapes(columns["n"].shape, *(r.shape for r in rates))
        )

    def takes(self, plan: Plan) -> tuple[int, int]:
        """Return that p will do, except in a band without a claim, which says which end counts."""
        if not plan.design.index.banded:
            return 1, 1
        return 2 if plan.claim is None else 1, 2

    def rises(self, plan: Plan) -> bool:
        """Tell whether the power rises with p: not in a demonstration."""
        return plan.verdict == "fail"

    def check_claim(self, claim: Claim, design: Any) -> None:
        """Refuse also a claim on both sides."""
        if claim.relation not in VERDICTS:
            raise InvalidValue("claim", "have the form p<=0.01, or p>=0.01 for a demonstration", str(claim))
        super().check_claim(claim, design)

    def verify(self, plan: Plan) -> None:
        """Refuse a rule on other limits than the plan's, one that never passes, and a verdict upside down."""
        design, rule, claim = plan.design, plan.rule, plan.claim
        text, index = write_accept(rule)["accept"], design.index
        if len(rule.sides) > 1 and not index.two:
            raise InvalidValue("limits", "both be written in the plan for this rule", text)
        if design.sides and design.sides != rule.sides:
            raise InvalidValue("accept", f"be about {' and '.join(design.sides)}", text)
        if index.two and index.known and 2 * rule.k >= index.width:
            raise InvalidValue("accept", f"have a k below {index.width / 2:.6g}, or nothing passes", text)
        if claim is not None:
            self.check_claim(claim, design)
            wanted = VERDICTS[claim.relation]
            if plan.verdict != wanted:
                raise InvalidValue("verdict", f"be {wanted} for the claim {claim}", plan.verdict)

    def critical_rule(self, design: Limits, claim: Claim, alpha: float, split: str) -> Accept:
        """Return the rule whose k keeps alpha exactly, at every split of the fraction."""
        del split
        k = float(design.index.critical(design.n, claim.value, alpha, passing=claim.side == "below"))
        return Accept(design.sides or ("upper",), "s" if design.deviation is None else "sigma", k)

    def smallest_amount(self, need: Need, lasting: bool) -> float:
        """Return the least n with which k keeps alpha and the power is reached at every split."""
        del lasting
        index, passing = need.design.index, need.claim.side == "below"
        claim, (catch,) = need.claim.value, need.catches

        def meets(n: int) -> bool:
            k = index.critical(n, claim, need.alpha, passing)
            return bool(index.chance(n, k, catch, passing, greatest=False) >= need.power)

        found = first_from(meets, _guess(need), 1 if index.known else 2, MOST_MEASURED)
        return math.nan if found is None else float(found)

    def read_observed(self, value: Any, plan: Plan) -> Sample:
        """Return an observed mean, and s where sigma is unknown, such as ``"mean 499.7 s 0.31"``."""
        if plan.design.deviation is None:
            mean, s = read_measured(value, "mean", "s")
            return Sample(mean, s)
        (mean,) = read_measured(value, "mean")
        return Sample(mean, plan.design.deviation)

    def outcome(self, plan: Plan, observed: Sample) -> bool:
        """Tell whether the claim is rejected: by failing, or in a demonstration by passing."""
        passes = quality_index(plan, observed) >= plan.rule.k
        return passes if plan.verdict == "pass" else not passes

    def follows_split(self, plan: Plan) -> bool:
        """Tell that a one-sided rule is always a region of its p-value."""
        del plan
        return True

    def p_value(self, plan: Plan, observed: Sample) -> float:
        """Return the size of the rule that the observed index would just meet."""
        just = replace(plan, rule=replace(plan.rule, k=quality_index(plan, observed)))
        return self.size(just)

    def limit(self, plan: Plan, observed: Sample, end: str, miss: float) -> float:
        """Return the fraction at which the observed index has the chance `miss`, at the worst split."""
        claim_of(plan)
        index = quality_index(plan, observed)
        return float(plan.design.index.fraction(plan.design.n, index, miss, passing=end == "upper"))

    def estimate(self, plan: Plan, observed: Sample) -> float:
        """Return the estimated fraction outside the limits: unbiased, with the least variance."""
        known = plan.design.deviation is not None
        found = [fraction_beyond(plan.design.n, distance, known) for distance in distances(plan, observed)]
        return float(sum(found))

    def critical_value(self, plan: Plan) -> float:
        """Return k."""
        return float(plan.rule.k)

    def region(self, plan: Plan) -> str:
        """Return what rejects the claim: an index below k, or in a demonstration all at least k."""
        parts, k = plan.rule.parts(), write_number(plan.rule.k)
        if plan.verdict == "pass":
            return " and ".join(f"{part} ≥ {k}" for part in parts)
        return " or ".join(f"{part} < {k}" for part in parts)

    def told(self, plan: Plan) -> str:
        """Return in words what rejects the claim."""
        parts, k = plan.rule.parts(), f"{plan.rule.k:.8g}"
        passing, failing = f"{' and '.join(parts)} of {k} or more", f"{' or '.join(parts)} below {k}"
        return passing if plan.verdict == "pass" else failing

    def remarks(self, plan: Plan) -> list[str]:
        """Say how wide the band of chances is at the claim, where there is one."""
        index, claim, n, k = plan.design.index, plan.claim, plan.design.n, plan.rule.k
        if not index.banded or claim is None:
            return []
        chances = (float(index.chance(n, k, claim.value, True, greatest)) for greatest in (False, True))
        least, most = map(show_rate, chances)
        return [
            f"With {show_rate(claim.value)} outside, the lot passes with probability {least} to {most}: it "
            "matters how that splits between the limits. The plan is judged at the worst split."
        ]

    def native(self, plan: Plan, cell: str) -> str | None:
        """Return the power for one limit; with two, the mean behind a fraction takes a search."""
        n, index, rising = plan.design.n, plan.design.index, plan.verdict == "fail"
        if index.two:
            return None
        z = f"_xlfn.NORM.S.INV({cell})"
        if index.known:
            score = f"SQRT({n})*({write_number(plan.rule.k)}+{z})"
            chance = f"_xlfn.NORM.S.DIST({score if rising else f'-{score}'},TRUE)"
        else:
            t = math.sqrt(n) * plan.rule.k
            low, high = (t, None) if rising else (None, t)
            chance = t_power(low, high, n - 1, f"-SQRT({n})*{z}") or ""
        none, all_ = (0, 1) if rising else (1, 0)
        return f"IF({cell}<=0,{none},IF({cell}>=1,{all_},{chance}))" if chance else None


def _chance(columns: Columns, passing: Any, reject: bool, p: Floats, share: Floats | None = None) -> Floats:
    """Return the chance to pass, or to fail; one call for each case.

    In a band: that of the split asked for, or else the greatest chance to reject a claim that holds, the
    least to reject one that does not; NaN where there is no claim to say so.
    """
    holds = np.where(columns["pass"], p >= columns["claim"], p <= columns["claim"])
    found = [columns[name] for name in ("two", "known", "n", "k", "width", "claim")]
    split = np.nan if share is None else share
    spread = np.broadcast_arrays(passing, holds == reject, *found, p, split)
    result = np.full(spread[0].shape, np.nan)
    for passes, greatest, *case in product((False, True), repeat=4):
        wanted = (passes, greatest, *case)
        mask = np.logical_and.reduce([part == value for part, value in zip(spread, wanted, strict=False)])
        if mask.any():
            n, k, width, claim, rate, part = (column[mask] for column in spread[4:])
            index = Index(case[0], case[1], width)
            asked = None if share is None else part
            chance = index.chance(n, k, rate, passes, greatest, asked)
            open_ = index.banded & np.isnan(claim) if share is None else not index.banded
            result[mask] = np.where(open_, np.nan, chance)
    return result


def _guess(need: Need) -> int:
    """Return about the n that is needed, by the normal approximation; a band needs about twice as many."""
    claim, catch = -normal_quantile([need.claim.value, need.catches[0]])
    alpha, miss = -normal_quantile([need.alpha, 1 - need.power])
    k = (claim * miss + catch * alpha) / (miss + alpha)
    index, n = need.design.index, ((alpha + miss) / (claim - catch)) ** 2
    more = 1 if index.known else 1 + k * k / 2
    return math.ceil(float(min(n * more * (1 + index.banded), MOST_MEASURED)))


VARIABLES = register(VariablesKind())
