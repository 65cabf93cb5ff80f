"""Cell function for plans that show a rate to be low."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Confidence, Lot
from steelyard.addin.words_forms import Allowed, WorstRate
from steelyard.core.demonstration import demonstration
from steelyard.core.text import write_plan


@cell(
    group="make",
    help="The smallest plan that shows, with a confidence, that the rate is below the worst acceptable one.",
    example="=SY_DEMONSTRATION(1%,95%)",
)
def SY_DEMONSTRATION(
    worst_rate: WorstRate, confidence: Confidence, allowed: Allowed = 0, lot: Lot | None = None
) -> Cells:
    """Return the text of a demonstration plan; a range of allowed counts gives a table of plans."""
    return write_plan(demonstration(worst_rate, confidence, allowed, lot))
