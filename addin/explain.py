"""Cell functions that explain and check."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import FieldName, Plans
from steelyard.core import VERSION, review
from steelyard.core.numbers import read_choice
from steelyard.core.text import write_plan


@cell(
    group="explain",
    help="The plan as sentences for a report, one per cell downwards.",
    example="=SY_EXPLAIN(A2)",
)
def SY_EXPLAIN(plan: Plans) -> Cells:
    """Return the plan as sentences, one per row."""
    return [[sentence] for sentence in review.sentences(plan)]


@cell(
    group="explain",
    help='"ok", or what is unusual about the plan or wrong with its text.',
    example="=SY_CHECK(A2)",
)
def SY_CHECK(plan: Plans) -> Cells:
    """Return whether a plan's text and size are in order."""
    return review.check(plan)


@cell(group="explain", help="Version of Steelyard that answers.", example="=SY_VERSION()")
def SY_VERSION() -> Cells:
    """Return the version."""
    return VERSION


@cell(
    group="explain",
    help="One field of the plan's text, such as n, units, lot, claim or alpha: a number where it is one.",
    example='=SY_FIELD(A2,"n")',
)
def SY_FIELD(plan: Plans, field: FieldName) -> Cells:
    """Return one field of a plan's text."""
    fields = dict(part.split(" ", 1) for part in write_plan(plan).split(" | ")[1:])
    word = read_choice(field, "field", tuple(fields))
    try:
        return float(fields[word])
    except ValueError:
        return fields[word]
