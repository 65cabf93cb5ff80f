"""Cell functions for several characteristics on one sample."""

from __future__ import annotations

from typing import Any

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Level
from steelyard.addin.words_forms import Characteristics, PlanCells, RateCells, Relation
from steelyard.core import together
from steelyard.core.errors import InvalidValue
from steelyard.core.plan import Plan


@cell(
    group="ask",
    help="Chance that a lot fails at least one of several characteristics, each with its own plan.",
    example="=SY_TOGETHER(A2:A5,B2:B5)",
)
def SY_TOGETHER(plans: PlanCells, rates: RateCells, relation: Relation = "independent") -> Cells:
    """Return the chance that a lot fails at least one characteristic; rows without a plan do not count."""
    pairs = _paired(plans, rates)
    return together.together([plan for plan, _ in pairs], [rate for _, rate in pairs], relation)


def _paired(plans: tuple[Plan | None, ...], rates: tuple[Any, ...]) -> list[tuple[Plan, Any]]:
    """Return each plan with the rate in its place; one rate alone is that of all."""
    spread = rates * len(plans) if len(rates) == 1 else rates
    if len(spread) != len(plans):
        raise InvalidValue("rates", f"be one for each of the {len(plans)} plan cells", len(rates))
    pairs = [(plan, rate) for plan, rate in zip(plans, spread, strict=True) if plan is not None]
    if any(rate is None for _, rate in pairs):
        raise InvalidValue("rates", "be given for every plan", None)
    return pairs


@cell(
    group="ask",
    help="Alpha for each of several characteristics that keeps the chance to fail at least one low.",
    example="=SY_SHARE_ALPHA(5%,4)",
)
def SY_SHARE_ALPHA(
    whole: Level, characteristics: Characteristics, relation: Relation = "independent"
) -> Cells:
    """Return the alpha for each characteristic."""
    return together.share_of_alpha(whole, characteristics, relation)
