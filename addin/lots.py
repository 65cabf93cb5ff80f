"""Cell functions for lots: the quality that leaves rectifying inspection, and switching from lot to lot."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Found, Plans, Rates, RectifiedLot, SwitchingAnswer, SwitchingRules
from steelyard.core import outgoing, switching
from steelyard.core.switching_rules import STANDARD


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


@cell(
    group="ask",
    help="Switching between normal, tightened and reduced inspection: the scheme in the long run, per lot.",
    example="=SY_SWITCHING(A2,A3,1%,A4)",
)
def SY_SWITCHING(
    normal: Plans,
    tightened: Plans,
    rate: Rates,
    reduced: Plans | None = None,
    answer: SwitchingAnswer = "acceptance",
    rules: SwitchingRules = STANDARD,
    score_plan: Plans | None = None,
) -> Cells:
    """Return one figure of a scheme: acceptance, average sample, a share of lots, or lots to the stop."""
    scheme = switching.Scheme(normal, tightened, reduced, rules, score_plan)
    return switching.answer(scheme, rate, answer)
