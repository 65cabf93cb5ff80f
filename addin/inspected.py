"""Cell functions for inspection that errs, and for fitting a plan's rule and size to its circumstances."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Order, Plans, Target, ToCatch
from steelyard.addin.words_forms import FalseAlarms, Misses
from steelyard.core import forms
from steelyard.core.text import write_plan


@cell(
    group="make",
    help="The same plan with imperfect inspection: rates and claim mean the truth, counts what is found.",
    example="=SY_INSPECTED(A2,10%,1%)",
)
def SY_INSPECTED(plan: Plans, misses: Misses, false_alarms: FalseAlarms = 0.0) -> Cells:
    """Return the text of the plan with misses and false alarms; its counts stay as they are."""
    return write_plan(forms.with_fields(plan, "misses", misses=misses, false_alarms=false_alarms))


@cell(
    group="make",
    help="The plan with the rule that its claim and alpha give, for the same sample.",
    example="=SY_KEEP_ALPHA(SY_INSPECTED(A2,10%))",
)
def SY_KEEP_ALPHA(plan: Plans) -> Cells:
    """Return the text of the plan with the rule that keeps its alpha."""
    return write_plan(forms.keeping_alpha(plan))


@cell(
    group="make",
    help="The smallest plan of the same form, claim and alpha that reaches the power at the rate to catch.",
    example="=SY_RESIZED(SY_INSPECTED(A2,10%),5%,90%)",
)
def SY_RESIZED(plan: Plans, catch: ToCatch, power: Target, lasting: Order = "first") -> Cells:
    """Return the text of the plan in the size that reaches a power."""
    return write_plan(forms.resized(plan, catch, power, lasting == "lasting"))
