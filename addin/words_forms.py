"""Words for the circumstances of a plan: inspection that errs, clusters, uncertain rates."""

from __future__ import annotations

from typing import Annotated, Any

from steelyard.addin.catalogue import Word
from steelyard.addin.words import as_typed, number, one_of, plan_cells, rate_cells
from steelyard.core.assurance import COUNTED
from steelyard.core.numbers import read_whole
from steelyard.core.plan import Plan
from steelyard.core.together import RELATIONS

Misses = Annotated[
    float, Word("Share of the defectives (or defects) that inspection misses, such as 10%.", number)
]
FalseAlarms = Annotated[
    float,
    Word(
        "Share of the good items that inspection condemns; false finds per unit where defects count.", number
    ),
]
WorstRate = Annotated[
    Any, Word("The rate to rule out: 1%, or for a lot also a number of defectives such as 8.", as_typed)
]
Allowed = Annotated[
    int,
    Word(
        "Defectives that the sample may show and still pass, from 0; or a range such as 0 to 5.",
        lambda v, name: read_whole(as_typed(v, name), name),
    ),
]
PlanCells = Annotated[
    tuple[Plan | None, ...],
    Word("A range of plan texts, one for each characteristic.", plan_cells, whole=True),
]
RateCells = Annotated[
    tuple[Any, ...],
    Word(
        "The true rate of each characteristic, in as many cells; or one rate for all.", rate_cells, whole=True
    ),
]
Relation = Annotated[
    str,
    Word("independent: the characteristics are; any: safe whatever their dependence.", one_of(RELATIONS)),
]
Characteristics = Annotated[
    int,
    Word(
        "How many characteristics are judged: a whole number.",
        lambda v, name: read_whole(as_typed(v, name), name, 1),
    ),
]
Correlation = Annotated[
    float,
    Word("Intraclass correlation of the items in a cluster, from 0 (independent) to below 1.", number),
]
Cluster = Annotated[float, Word("Items (or units) in a cluster.", number)]
Wanted = Annotated[
    int,
    Word(
        "Defectives to be found before inspection ends: a whole number from 1.",
        lambda v, name: read_whole(as_typed(v, name), name, 1),
    ),
]
PriorA = Annotated[
    float,
    Word("First number of the rate's law: defectives already seen, in a beta or gamma law; above 0.", number),
]
PriorB = Annotated[
    float,
    Word(
        "Second number: good items already seen; for defects, the units in which prior_a were seen. Above 0.",
        number,
    ),
]
Counted = Annotated[
    str,
    Word("all: every rejection; right: only those of a claim that is false.", one_of(COUNTED)),
]
