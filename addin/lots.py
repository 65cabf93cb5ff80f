"""Cell functions for the quality that leaves inspection when failed lots are inspected whole."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Found, Plans, Rates, RectifiedLot
from steelyard.core import outgoing


@cell(
    group="ask",
    help="Average outgoing quality (AOQ) at this incoming rate, if failed lots are inspected whole.",
    example="=SY_OUTGOING(A2,1%,1000)",
)
def SY_OUTGOING(
    plan: Plans, rate: Rates, lot: RectifiedLot | None = None, defectives: Found = "replaced"
) -> Cells:
    """Return the average outgoing quality."""
    return outgoing.outgoing(plan, rate, lot, defectives)


@cell(
    group="ask",
    help="Average outgoing quality limit (AOQL): the worst outgoing quality, and the incoming rate of it.",
    example="=SY_OUTGOING_LIMIT(A2,1000)",
)
def SY_OUTGOING_LIMIT(plan: Plans, lot: RectifiedLot | None = None, defectives: Found = "replaced") -> Cells:
    """Return the limit and, beside it, the incoming rate where it lies."""
    return [list(outgoing.outgoing_limit(plan, lot, defectives))]


@cell(
    group="ask",
    help="Average total inspected (ATI) per lot at this incoming rate, if failed lots are inspected whole.",
    example="=SY_TOTAL_INSPECTED(A2,1%,1000)",
)
def SY_TOTAL_INSPECTED(plan: Plans, rate: Rates, lot: RectifiedLot | None = None) -> Cells:
    """Return the average total inspected."""
    return outgoing.total_inspected(plan, rate, lot)
