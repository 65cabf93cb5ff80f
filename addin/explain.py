"""Cell functions that explain and check."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Plans
from steelyard.core import VERSION, review


@cell(group="explain", help="The plan as sentences for a report, one per cell downwards.", example="=SY_EXPLAIN(A2)")
def SY_EXPLAIN(plan: Plans) -> Cells:
    """Return the plan as sentences, one per row."""
    return [[sentence] for sentence in review.sentences(plan)]


@cell(group="explain", help='"ok", or what is unusual about the plan or wrong with its text.', example="=SY_CHECK(A2)")
def SY_CHECK(plan: Plans) -> Cells:
    """Return whether a plan's text and size are in order."""
    return review.check(plan)


@cell(group="explain", help="Version of Steelyard that answers.", example="=SY_VERSION()")
def SY_VERSION() -> Cells:
    """Return the version."""
    return VERSION
