"""Cell functions that ask a plan."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.grid import asking, rates_grid
from steelyard.addin.words import CellName, Confidence, End, Observed, PlanRange, Plans, Rates, Second, Target
from steelyard.core import evidence, questions, rates, rivals
from steelyard.core.errors import NoAnswer
from steelyard.core.kind import kind_of
from steelyard.core.text import write_plan


@cell(
    group="ask",
    help="Power: the chance that the plan rejects its claim at this true rate.",
    example="=SY_POWER(A2,5%)",
    grid=asking(lambda kind: kind.reject),
)
def SY_POWER(plan: Plans, rate: Rates, second: Second = None) -> Cells:
    """Return the chance that the plan rejects its claim at a true rate."""
    return questions.power(plan, rate, second)


@cell(
    group="ask",
    help="Type II error (beta): the chance that a false claim is not rejected at this true rate.",
    example="=SY_BETA(A2,5%)",
)
def SY_BETA(plan: Plans, rate: Rates, second: Second = None) -> Cells:
    """Return the chance that the plan does not reject a claim that is false."""
    return questions.beta(plan, rate, second)


@cell(
    group="ask",
    help="The chance that the lot passes at this true rate: the operating characteristic (OC curve).",
    example="=SY_ACCEPTANCE(A2,1%)",
    grid=asking(lambda kind: kind.passing),
)
def SY_ACCEPTANCE(plan: Plans, rate: Rates, second: Second = None) -> Cells:
    """Return the chance that the lot passes."""
    return questions.acceptance(plan, rate, second)


@cell(
    group="ask",
    help="Actual size: the largest chance of rejecting the claim while it is true (type I error).",
    example="=SY_SIZE(A2)",
)
def SY_SIZE(plan: Plans) -> Cells:
    """Return the actual size of a plan."""
    return questions.size(plan)


@cell(
    group="ask",
    help="Critical value: the first count or measure that rejects the claim.",
    example="=SY_CRITICAL(A2)",
)
def SY_CRITICAL(plan: Plans, end: End | None = None) -> Cells:
    """Return the critical value of a plan."""
    return questions.critical(plan, end)


@cell(
    group="ask",
    help="Critical region: every count or measure that rejects the claim.",
    example="=SY_REGION(A2)",
)
def SY_REGION(plan: Plans) -> Cells:
    """Return the critical region in words."""
    return questions.region(plan)


@cell(
    group="ask",
    help="The true rate at which the power reaches a target.",
    example="=SY_RATE_FOR(A2,90%)",
    grid=rates_grid,
)
def SY_RATE_FOR(plan: Plans, power: Target, end: End | None = None) -> Cells:
    """Return the rate at which the power reaches a target."""
    return rates.rate_for(plan, power, end)


@cell(
    group="ask",
    help="P-value of an observed result under the claim; at most alpha exactly when the plan rejects.",
    example="=SY_PVALUE(A2,3)",
)
def SY_PVALUE(plan: Plans, observed: Observed) -> Cells:
    """Return the p-value of an observed result."""
    return evidence.p_value(plan, observed)


@cell(
    group="ask",
    help="Decision on an observed result: claim rejected or not, and what that means for the lot.",
    example="=SY_DECIDE(A2,3)",
)
def SY_DECIDE(plan: Plans, observed: Observed) -> Cells:
    """Return the decision on an observed result."""
    return evidence.decide(plan, observed)


@cell(
    group="ask",
    help="Exact confidence limit for the true rate after the sample.",
    example='=SY_LIMIT(A2,3,"upper")',
)
def SY_LIMIT(plan: Plans, observed: Observed, end: End, confidence: Confidence | None = None) -> Cells:
    """Return an exact confidence limit for the true rate."""
    return evidence.limit(plan, observed, end, confidence)


@cell(
    group="ask",
    help="The most powerful of several plans at this true rate.",
    example="=SY_BEST(A2:A5,5%)",
)
def SY_BEST(plans: PlanRange, rate: Rates) -> Cells:
    """Return the text of the most powerful plan."""
    return write_plan(rivals.best(plans, rate))


@cell(
    group="ask",
    help="The rates at which the power curves of two plans cross, one below the other.",
    example="=SY_CROSSING(A2,A3)",
)
def SY_CROSSING(plan_a: Plans, plan_b: Plans) -> Cells:
    """Return the rates at which two power curves cross."""
    found = rivals.crossing(plan_a, plan_b)
    return found[0] if len(found) == 1 else [[rate] for rate in found]


@cell(
    group="explain",
    help="The power function as algebra, or as a sum where it would grow long.",
    example="=SY_EXPRESSION(A2)",
)
def SY_EXPRESSION(plan: Plans) -> Cells:
    """Return the power function as algebra."""
    found = kind_of(plan).algebra(plan)
    if found is None:
        message = f"a plan of kind {plan.kind} has no power function in plain algebra; see SY_POWER"
        raise NoAnswer(message)
    return found


@cell(
    group="explain",
    help="A formula of the spreadsheet's own functions that gives the power for the rate in a cell.",
    example='=SY_NATIVE(A2,"B2")',
)
def SY_NATIVE(plan: Plans, cell: CellName) -> Cells:
    """Return a formula of the spreadsheet's own functions."""
    found = kind_of(plan).native(plan, cell)
    if found is None:
        message = f"the spreadsheet's own functions cannot give the power of a plan of kind {plan.kind}"
        raise NoAnswer(message)
    return "=" + found.replace("_xlfn.", "")
