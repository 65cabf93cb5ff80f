"""Cell functions that make plans for what is measured."""

from __future__ import annotations

from typing import Any

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Level, MeanClaim, Measured, PlanningSigma, Side, Sigma, SigmaClaim, Verdict
from steelyard.core import making
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
