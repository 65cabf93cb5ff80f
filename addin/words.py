"""The shared vocabulary of arguments: what the wizard says of each, and how its cell is read.

The only place where a cell's content becomes a value.
"""

from __future__ import annotations

import re
from typing import Annotated, Any

from steelyard.addin.catalogue import Word
from steelyard.addin.plans import plan_of
from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import read_choice, read_number, read_probability, read_whole, write_number
from steelyard.core.outgoing import FOUND
from steelyard.core.plan import SIDES, SPLITS, VERDICTS, Plan
from steelyard.core.stages import STOPS
from steelyard.core.switching import ANSWERS
from steelyard.core.switching_rules import Rules, read_rules

LONGEST_ADDRESS = 60
_ADDRESS = re.compile(r"(?:(?:'[^']+'|\$?\w+)[!.])?(?:\$?[A-Z]{1,3}\$?\d{1,7}|[^\W\d]\w*)", re.IGNORECASE)
ENDS = ("lower", "upper")
ORDERS = ("first", "lasting")


def as_typed(value: Any, name: str) -> Any:
    """Hand a number or text on as it was typed; a logical value is neither."""
    if isinstance(value, bool):
        raise InvalidValue(name, "be a number or text", str(value).upper())
    return value


def text(value: Any, name: str) -> str:
    """Return a text cell."""
    if not isinstance(value, str):
        raise InvalidValue(name, "be text", value)
    return value.strip()


def number(value: Any, name: str) -> float:
    """Return a number; TRUE and FALSE are none."""
    return read_number(as_typed(value, name), name)


def address(value: Any, name: str) -> str:
    """Return a cell's address or name, which may say its sheet."""
    found = text(value, name)
    if len(found) > LONGEST_ADDRESS or not _ADDRESS.fullmatch(found):
        raise InvalidValue(name, "be the address of a cell, such as B2 or 'Power grid'!B2", value)
    return found


def one_of(allowed: tuple[str, ...]) -> Any:
    """Return a reader of one of several words."""
    return lambda value, name: read_choice(text(value, name), name, allowed)


def cells_in(value: Any) -> tuple[Any, ...]:
    """Return the cells of a whole range, or a single cell, in reading order; blank ones are None."""
    rows = value if isinstance(value, tuple) else ((value,),)
    return tuple(None if cell in (None, "") else cell for row in rows for cell in row)


def plan_cells(value: Any, name: str) -> tuple[Plan | None, ...]:
    """Return the plans of a whole range in their places; None for blank cells."""
    plans = tuple(None if cell is None else plan_of(cell, name) for cell in cells_in(value))
    if not any(plans):
        raise InvalidValue(name, "hold at least one plan", None)
    return plans


def stage_cells(value: Any, name: str) -> Any:
    """Return the cells of a whole range as a list of stages; a blank one before others means none."""
    cells = [as_typed(cell, name) for cell in cells_in(value)]
    while cells and cells[-1] is None:
        cells.pop()
    if not cells:
        raise InvalidValue(name, "hold at least one number", None)
    if len(cells) == 1:
        return cells[0]
    return " then ".join(
        "none" if cell is None else cell if isinstance(cell, str) else write_number(read_number(cell, name))
        for cell in cells
    )


def rate_cells(value: Any, name: str) -> tuple[Any, ...]:
    """Return the rates of a whole range as typed, in their places; None for blank cells."""
    return tuple(None if cell is None else as_typed(cell, name) for cell in cells_in(value))


def plan_texts(value: Any, name: str) -> tuple[Plan, ...]:
    """Return the plans of a whole range, blank cells left out."""
    return tuple(plan for plan in plan_cells(value, name) if plan is not None)


Plans = Annotated[
    Plan, Word("Plan text, such as binomial | n 50 | claim p<=0.02 | reject x>=4, or a range.", plan_of)
]
PlanRange = Annotated[tuple[Plan, ...], Word("A range of plan texts.", plan_texts, whole=True)]
Rates = Annotated[
    Any,
    Word(
        "The true value: a defect rate (2% or 0.02), defects per unit, or defectives in the lot; or a range.",
        as_typed,
    ),
]
Second = Annotated[
    Any, Word("Second parameter, where the kind has one: the other sample's rate, or sigma.", as_typed)
]
Count = Annotated[
    int, Word("Items to inspect: a whole number.", lambda v, name: read_whole(as_typed(v, name), name, 1))
]
Units = Annotated[float, Word("Units to inspect: any number above 0, such as metres or hours.", number)]
Lot = Annotated[
    int, Word("Items in the lot: a whole number.", lambda v, name: read_whole(as_typed(v, name), name, 2))
]
ClaimText = Annotated[Any, Word("What is claimed: a rate such as 2%, or p<=2%, p>=5%, p=50%.", as_typed)]
Level = Annotated[
    float,
    Word(
        "Nominal significance level alpha, between 0 and 1.", lambda v, n: read_probability(as_typed(v, n), n)
    ),
]
Target = Annotated[
    float,
    Word(
        "Wanted power at the rate to catch, between 0 and 1.",
        lambda v, n: read_probability(as_typed(v, n), n),
    ),
]
Confidence = Annotated[
    float,
    Word(
        "Confidence level, between 0 and 1.",
        lambda v, n: read_probability(as_typed(v, n), n),
        left_out="1 minus the plan's alpha",
    ),
]
Side = Annotated[
    str,
    Word(
        "Where the true rate lies when the claim is false: above, below or either.",
        one_of(tuple(SIDES.values())),
        left_out="as the claim says, else above",
    ),
]
Split = Annotated[str, Word("How a two-sided test shares alpha: half, nearest or rarest.", one_of(SPLITS))]
Verdict = Annotated[str, Word("What rejecting the claim means for the lot: fail or pass.", one_of(VERDICTS))]
End = Annotated[
    str, Word("Which end: lower or upper.", one_of(ENDS), left_out="the only end at which the plan rejects")
]
Order = Annotated[
    str,
    Word(
        "first: least size that reaches the power; lasting: size from which it never falls short.",
        one_of(ORDERS),
    ),
]
Observed = Annotated[
    Any,
    Word(
        "What the sample showed: the count found, 2+1 by stages, 40 inspected 3 found; or a range.", as_typed
    ),
]
KindName = Annotated[str, Word("Kind of plan: binomial, poisson, hypergeometric, …", text)]
Number = Annotated[float, Word("A number.", number)]
CellName = Annotated[str, Word("Address of the cell with the rate, as text such as B2.", address)]
Size = Annotated[float, Word("How much is inspected: items, or units for defects per unit.", number)]
Extra = Annotated[Any, Word("The lot's size, or the known sigma, where the kind needs one.", as_typed)]
RejectFrom = Annotated[float, Word("Reject the claim from this count (or measure) upwards.", number)]
RejectTo = Annotated[float, Word("Reject the claim up to this count (or measure).", number)]
ToCatch = Annotated[
    Any, Word('The rate that must be caught, such as 5%; for either side also "1% and 5%".', as_typed)
]
FieldName = Annotated[str, Word("Word that starts the field, such as n, units, lot, claim or alpha.", text)]
StageSizes = Annotated[
    Any, Word("How much each stage inspects: 50 then 50, or a range.", stage_cells, whole=True)
]
StageAccepts = Annotated[
    Any,
    Word(
        "Acceptance number after each stage, for all found so far: 1 then 4; none where it can't pass yet.",
        stage_cells,
        whole=True,
    ),
]
StageRejects = Annotated[
    Any,
    Word(
        "Rejection number after each stage, for all found so far: 4 then 5; none where it can't fail yet.",
        stage_cells,
        whole=True,
    ),
]
StageStop = Annotated[
    str,
    Word(
        "When inspection stops: stage-end, on-reject (as soon as the lot must fail) or on-decision.",
        one_of(STOPS),
    ),
]
StopAt = Annotated[
    int,
    Word(
        "The most items to inspect. Blank: twice the single plan for the same risks.",
        lambda v, n: read_whole(as_typed(v, n), n, 1),
    ),
]
SwitchingRules = Annotated[
    Rules,
    Word(
        "The rules as numbers, such as tighten 2 of 5 | resume 5 | stop 5 | reduce 30 by 2; or never.",
        lambda v, n: read_rules(text(v, n)),
    ),
]
SwitchingAnswer = Annotated[
    str,
    Word(
        "acceptance; sample (average per lot); share of lots normal, tightened, reduced; lots (to the stop).",
        one_of(ANSWERS),
    ),
]
StageRatio = Annotated[
    float, Word("The second stage as a multiple of the first: 1 or 2. Blank: the better one.", number)
]
RectifiedLot = Annotated[
    Any, Word("Items, or units, in the lot. A plan for a finite lot knows its own.", as_typed)
]
Found = Annotated[
    str,
    Word("What happens to defectives that are found: replaced by good items, or removed.", one_of(FOUND)),
]
Seed = Annotated[
    int,
    Word(
        "Any whole number from 0: note it, so that the draw can be repeated.",
        lambda v, n: read_whole(as_typed(v, n), n),
    ),
]
