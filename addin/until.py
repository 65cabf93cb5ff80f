"""Cell function for plans that inspect until so many defectives are found."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import ClaimText, Level, Side, Verdict
from steelyard.addin.words_forms import Wanted
from steelyard.core.making import plan_from_claim
from steelyard.core.text import write_plan


@cell(
    group="make",
    help="Plan that inspects items until so many are defective: how few, or many, items reject the claim.",
    example="=SY_UNTIL(3,2%)",
)
def SY_UNTIL(
    defectives: Wanted,
    claim: ClaimText,
    alpha: Level = 0.05,
    side: Side | None = None,
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan that inspects until so many defectives are found."""
    return write_plan(plan_from_claim("until", {"until": defectives}, claim, alpha, side, verdict=verdict))
