"""Cell function for power over an uncertain rate."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Plans
from steelyard.addin.words_forms import Counted, PriorA, PriorB
from steelyard.core.assurance import assurance


@cell(
    group="ask",
    help="Assurance: the chance that the plan rejects, averaged over an uncertain rate instead of one rate.",
    example="=SY_ASSURANCE(A2,2,38)",
)
def SY_ASSURANCE(plan: Plans, prior_a: PriorA, prior_b: PriorB, counted: Counted = "all") -> Cells:
    """Return the chance of a rejection, or of a right one, over a beta or gamma law of the rate."""
    return assurance(plan, prior_a, prior_b, counted)
