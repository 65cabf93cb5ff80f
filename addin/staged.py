"""Cell functions for samples that are inspected part by part."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.grid import asking
from steelyard.addin.words import (
    ClaimText,
    KindName,
    Level,
    Lot,
    Plans,
    Rates,
    Second,
    StageAccepts,
    StageRatio,
    StageRejects,
    StageSizes,
    StageStop,
    StopAt,
    Target,
    ToCatch,
)
from steelyard.core import double, outgoing, sequential, staging
from steelyard.core.abilities import average_or_nothing
from steelyard.core.text import write_plan


@cell(
    group="make",
    help="Double or multiple plan: what each stage inspects, and which counts accept or reject after it.",
    example='=SY_STAGES("binomial","50 then 50","1 then 4","4 then 5",2%)',
)
def SY_STAGES(
    kind: KindName,
    sizes: StageSizes,
    accepts: StageAccepts,
    rejects: StageRejects,
    claim: ClaimText | None = None,
    lot: Lot | None = None,
    stop_when: StageStop = "stage-end",
    alpha: Level | None = None,
) -> Cells:
    """Return the text of a plan in stages."""
    return write_plan(staging.plan_in_stages(kind, sizes, accepts, rejects, claim, lot, stop_when, alpha))


@cell(
    group="make",
    help="The double plan that keeps alpha and reaches the power with the least average sample at the claim.",
    example='=SY_DOUBLE("binomial",1%,5%,5%,90%)',
)
def SY_DOUBLE(
    kind: KindName,
    claim: ClaimText,
    alpha: Level,
    catch: ToCatch,
    power: Target,
    ratio: StageRatio | None = None,
    lot: Lot | None = None,
) -> Cells:
    """Return the text of the double plan with the smallest average sample."""
    return write_plan(double.smallest_double(kind, claim, alpha, catch, power, ratio=ratio, lot=lot))


@cell(
    group="make",
    help="Sequential plan with Wald's lines: the count is compared with two numbers after every item.",
    example="=SY_SEQUENTIAL(1%,5%,10%,90%)",
)
def SY_SEQUENTIAL(
    claim: ClaimText, alpha: Level, catch: ToCatch, power: Target, stop_at: StopAt | None = None
) -> Cells:
    """Return the text of a sequential plan."""
    return write_plan(sequential.sequential_plan(claim, alpha, catch, power, stop_at))


@cell(
    group="explain",
    help="The inspector's table: items inspected, acceptance and rejection number, wherever one changes.",
    example="=SY_STEPS(A2)",
)
def SY_STEPS(plan: Plans) -> Cells:
    """Return a row for each step: amount inspected, acceptance number, rejection number."""
    return [list(row) for row in outgoing.steps(plan)]


@cell(
    group="ask",
    help="Average sample number: how much is inspected on average until the plan decides, at this true rate.",
    example="=SY_AVERAGE_SAMPLE(A2,1%)",
    grid=asking(average_or_nothing),
)
def SY_AVERAGE_SAMPLE(plan: Plans, rate: Rates, second: Second = None) -> Cells:
    """Return the average sample number."""
    return outgoing.average_sample(plan, rate, second)


@cell(
    group="ask",
    help="How the plan may end at this true rate: rows of amount inspected, chance to pass, chance to fail.",
    example="=SY_ENDINGS(A2,1%)",
)
def SY_ENDINGS(plan: Plans, rate: Rates) -> Cells:
    """Return a row for each way to end: amount inspected, chance to pass there, chance to fail there."""
    found = outgoing.endings(plan, rate)
    columns = found.amounts, found.accepted[:, 0], found.rejected[:, 0]
    return [list(row) for row in zip(*(column.tolist() for column in columns), strict=True)]
