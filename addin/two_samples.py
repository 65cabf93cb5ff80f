"""Cell functions for plans that compare two samples."""

from __future__ import annotations

from typing import Any

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Level, Plans, Split, Target, Verdict
from steelyard.addin.words_two import (
    CountTest,
    FirstItems,
    FirstMeasured,
    FirstUnits,
    FirstValue,
    MeansTest,
    PlanningSigmas,
    Ratio,
    SecondItems,
    SecondMeasured,
    SecondSide,
    SecondUnits,
    SecondValue,
    TwoKind,
    TwoTest,
)
from steelyard.core import two_sizes
from steelyard.core.abilities import bordering
from steelyard.core.kind import kind_of
from steelyard.core.text import write_plan


def _planned(
    kind: str, values: dict[str, Any], side: str, alpha: float, split: str = "half", verdict: str = "fail"
) -> str:
    return write_plan(two_sizes.comparison(kind, values, side, alpha, split, verdict))


@cell(
    group="make",
    help="Plan that compares the defect rates of two samples: which pairs of counts reject the claim.",
    example='=SY_TWO_BINOMIAL(50,60,5%,"above")',
)
def SY_TWO_BINOMIAL(
    first_items: FirstItems,
    second_items: SecondItems,
    alpha: Level = 0.05,
    side: SecondSide = "above",
    test: CountTest = "boschloo",
    split: Split = "half",
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan that compares two defect rates."""
    values = {"n": (first_items, second_items), "test": test}
    return _planned("two binomial", values, side, alpha, split, verdict)


@cell(
    group="make",
    help="Plan that compares the defects per unit of two samples (conditional exact test).",
    example='=SY_TWO_POISSON(100,120,5%,"above")',
)
def SY_TWO_POISSON(
    first_units: FirstUnits,
    second_units: SecondUnits,
    alpha: Level = 0.05,
    side: SecondSide = "above",
    split: Split = "half",
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan that compares two rates of defects."""
    return _planned("two poisson", {"units": (first_units, second_units)}, side, alpha, split, verdict)


@cell(
    group="make",
    help="Plan that compares the means of two samples: Welch's test, or the pooled t.",
    example='=SY_TWO_MEANS(12,15,0.4,5%,"above")',
)
def SY_TWO_MEANS(
    first_items: FirstMeasured,
    second_items: SecondMeasured,
    planning_sigma: PlanningSigmas,
    alpha: Level = 0.05,
    side: SecondSide = "above",
    test: MeansTest = "welch",
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan that compares two means."""
    values = {"n": (first_items, second_items), "planning_sigma": planning_sigma, "test": test}
    return _planned("two means", values, side, alpha, verdict=verdict)


@cell(
    group="make",
    help="Plan that compares the standard deviations of two samples (F test).",
    example='=SY_TWO_SPREADS(12,15,5%,"above")',
)
def SY_TWO_SPREADS(
    first_items: FirstMeasured,
    second_items: SecondMeasured,
    alpha: Level = 0.05,
    side: SecondSide = "above",
    verdict: Verdict = "fail",
) -> Cells:
    """Return the text of a plan that compares two standard deviations."""
    return _planned("two spreads", {"n": (first_items, second_items)}, side, alpha, verdict=verdict)


@cell(
    group="make",
    help="The smallest two samples that show a difference with the wanted power.",
    example='=SY_TWO_SMALLEST("two binomial",10%,25%,90%)',
)
def SY_TWO_SMALLEST(
    kind: TwoKind,
    first_value: FirstValue,
    second_value: SecondValue,
    power: Target,
    alpha: Level = 0.05,
    side: SecondSide = "above",
    ratio: Ratio = 1.0,
    test: TwoTest | None = None,
    planning_sigma: PlanningSigmas | None = None,
) -> Cells:
    """Return the text of the first plan with two samples that reaches a power."""
    values = {"test": test, "planning_sigma": planning_sigma}
    rates = (first_value, second_value)
    return write_plan(two_sizes.smallest_comparison(kind, values, rates, power, alpha, side, ratio))


@cell(
    group="explain",
    help="The pairs of counts that reject: for each first count, up to and from which second count.",
    example="=SY_PAIRS(A2)",
)
def SY_PAIRS(plan: Plans) -> Cells:
    """Return a header and a row for each count of the first sample."""
    rows = bordering(kind_of(plan)).borders(plan)
    return [["first count", "rejected up to", "rejected from"], *map(list, rows)]
