"""Cell functions that make a plan: each answers with the plan's text."""

from __future__ import annotations

from typing import Any

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import (
    ClaimText,
    Count,
    Extra,
    KindName,
    Level,
    Lot,
    Order,
    RejectFrom,
    RejectTo,
    Side,
    Size,
    Split,
    Target,
    ToCatch,
    Units,
    Verdict,
)
from steelyard.core import making
from steelyard.core.text import write_plan


def _planned(
    kind: str, values: dict[str, Any], claim: Any, alpha: float, side: Any, split: str, verdict: str
) -> str:
    return write_plan(making.plan_from_claim(kind, values, claim, alpha, side, split, verdict))


@cell(
    group="make",
    help="Plan for the rate of defectives among n items: which counts reject the claim.",
    example="=SY_BINOMIAL(50,2%)",
)
def SY_BINOMIAL(
    n: Count,
    claim: ClaimText,
    alpha: Level = 0.05,
    side: Side | None = None,
    split: Split = "half",
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a binomial plan."""
    return _planned("binomial", {"n": n}, claim, alpha, side, split, verdict)


@cell(
    group="make",
    help="Plan for defects per unit: which counts of defects in the inspected units reject the claim.",
    example="=SY_POISSON(120,0.05)",
)
def SY_POISSON(
    units: Units,
    claim: ClaimText,
    alpha: Level = 0.05,
    side: Side | None = None,
    split: Split = "half",
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a Poisson plan."""
    return _planned("poisson", {"units": units}, claim, alpha, side, split, verdict)


@cell(
    group="make",
    help="Plan for a finite lot: which counts of defectives in the sample reject the claim about the lot.",
    example="=SY_HYPERGEOMETRIC(800,50,1%)",
)
def SY_HYPERGEOMETRIC(
    lot: Lot,
    n: Count,
    claim: ClaimText,
    alpha: Level = 0.05,
    side: Side | None = None,
    split: Split = "half",
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan for a finite lot."""
    return _planned("hypergeometric", {"lot": lot, "n": n}, claim, alpha, side, split, verdict)


@cell(
    group="make",
    help="A rule given from outside, such as a contract's: kept as it is, and judged by every question.",
    example='=SY_RULE("binomial",125,4)',
)
def SY_RULE(
    kind: KindName,
    n: Size,
    reject_from: RejectFrom | None = None,
    reject_to: RejectTo | None = None,
    claim: ClaimText | None = None,
    lot_or_sigma: Extra | None = None,
    alpha: Level | None = None,
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan whose rule is given."""
    return write_plan(
        making.plan_from_rule(kind, n, reject_from, reject_to, claim, lot_or_sigma, alpha, verdict)
    )


@cell(
    group="make",
    help="The smallest plan that keeps alpha at the claim and reaches the power at the rate to catch.",
    example='=SY_SMALLEST("binomial",1%,5%,5%,90%)',
)
def SY_SMALLEST(
    kind: KindName,
    claim: ClaimText,
    alpha: Level,
    catch: ToCatch,
    power: Target,
    side: Side | None = None,
    lasting: Order = "first",
    lot_or_sigma: Extra | None = None,
    split: Split = "half",
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of the smallest plan that meets two risks."""
    plan = making.smallest_from(kind, claim, alpha, catch, power, side, lasting, lot_or_sigma, split, verdict)
    return write_plan(plan)
