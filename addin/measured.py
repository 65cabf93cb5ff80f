"""Cell functions that make plans for what is measured."""

from __future__ import annotations

from typing import Any

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Confidence, Level, Plans, Side, Split, Target, ToCatch, Verdict
from steelyard.addin.words_measured import (
    AllowedFailures,
    CapabilityTarget,
    Figures,
    FractionClaim,
    KnownSigma,
    LifeClaim,
    LowerLimit,
    MeanClaim,
    Measured,
    MeasureName,
    PlanningSigma,
    Several,
    Sigma,
    SigmaClaim,
    Stop,
    TestAmount,
    UnitsOnTest,
    UpperLimit,
)
from steelyard.core import life, making, measuring
from steelyard.core.evidence import estimate
from steelyard.core.text import write_plan


def _planned(kind: str, values: dict[str, Any], claim: Any, alpha: float, side: Any, verdict: str) -> str:
    return write_plan(making.plan_from_claim(kind, values, claim, alpha, side, verdict=verdict))


@cell(
    group="make",
    help="Plan for a mean whose sigma is known: which sample means reject the claim.",
    example='=SY_NORMAL(12,"mean>=500",0.4)',
)
def SY_NORMAL(
    n: Measured,
    claim: MeanClaim,
    sigma: Sigma,
    alpha: Level = 0.05,
    side: Side | None = None,
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan for a mean, sigma known."""
    return _planned("normal", {"n": n, "sigma": sigma}, claim, alpha, side, verdict)


@cell(
    group="make",
    help="Plan for a mean whose sigma is unknown (Student's t): which values of t reject the claim.",
    example='=SY_STUDENT(12,"mean>=500",5%,,0.4)',
)
def SY_STUDENT(
    n: Measured,
    claim: MeanClaim,
    alpha: Level = 0.05,
    side: Side | None = None,
    planning_sigma: PlanningSigma | None = None,
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan for a mean, sigma unknown."""
    return _planned("student", {"n": n, "planning_sigma": planning_sigma}, claim, alpha, side, verdict)


@cell(
    group="make",
    help="Plan for a standard deviation (chi-square): which s of the sample reject the claim.",
    example="=SY_SPREAD(12,0.4)",
)
def SY_SPREAD(
    n: Measured,
    claim: SigmaClaim,
    alpha: Level = 0.05,
    side: Side | None = None,
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan for a standard deviation."""
    return _planned("spread", {"n": n}, claim, alpha, side, verdict)


@cell(
    group="make",
    help="The smallest plan by measurement (k method) that keeps alpha at the claim and reaches the power.",
    example="=SY_VARIABLES(1%,5%,5%,90%)",
)
def SY_VARIABLES(
    claim: FractionClaim,
    alpha: Level,
    catch: ToCatch,
    power: Target,
    sigma: KnownSigma | None = None,
    lower: LowerLimit | None = None,
    upper: UpperLimit | None = None,
) -> Cells:
    """Return the text of the smallest plan by measurement that meets two risks."""
    return write_plan(measuring.variables_plan(claim, alpha, catch, power, sigma, lower, upper))


@cell(
    group="make",
    help="What a sample must show of a capability: Ppk, tolerance factors, the plan, the test in words.",
    example="=SY_CAPABILITY(30,1.33,95%)",
)
def SY_CAPABILITY(
    n: Several, target: CapabilityTarget, confidence: Confidence = 0.95, measure: MeasureName = "ppk"
) -> Cells:
    """Return labels and numbers, then sentences."""
    found = measuring.capability(n, target, confidence, measure)
    numbers = {"Ppk of the sample": found.one / 3, "k, one limit": found.one, "k, two limits": found.two}
    rows = [*numbers.items(), ("plan", write_plan(found.plan))]
    return [*map(list, rows), *([sentence, None] for sentence in found.sentences())]


@cell(
    group="ask",
    help="Estimated fraction outside the limits after the sample: unbiased, with the least variance.",
    example='=SY_ESTIMATE(A2,"mean 499.7 s 0.31")',
)
def SY_ESTIMATE(plan: Plans, observed: Figures) -> Cells:
    """Return the estimated fraction outside the limits."""
    return estimate(plan, observed)


@cell(
    group="make",
    help="Life test for the mean life of units that fail at a constant rate; or the least time to show one.",
    example='=SY_LIFE("life<=1000",10%)',
)
def SY_LIFE(
    claim: LifeClaim,
    alpha: Level = 0.05,
    amount: TestAmount | None = None,
    stop: Stop = "time",
    units: UnitsOnTest | None = None,
    side: Side | None = None,
    split: Split = "half",
    verdict: Verdict | None = None,
    allowed: AllowedFailures = 0,
) -> Cells:
    """Return the text of a life test."""
    plan = life.life_plan(
        claim, alpha, amount, stop, units, side=side, split=split, verdict=verdict, allowed=allowed
    )
    return write_plan(plan)
