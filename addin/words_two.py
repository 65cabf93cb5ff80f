"""The words of functions that compare two samples; see `steelyard.addin.words`."""

from __future__ import annotations

from typing import Annotated, Any

from steelyard.addin.catalogue import Word
from steelyard.addin.words import as_typed, number, one_of, text
from steelyard.core.numbers import read_whole
from steelyard.core.plan import SIDES
from steelyard.core.two_tables import TESTS

FirstItems = Annotated[
    int,
    Word(
        "Items of the first sample, the one compared with: a whole number.",
        lambda v, name: read_whole(as_typed(v, name), name, 1),
    ),
]
SecondItems = Annotated[
    int,
    Word(
        "Items of the second sample: a whole number.", lambda v, name: read_whole(as_typed(v, name), name, 1)
    ),
]
CountTest = Annotated[
    str,
    Word(
        "boschloo or barnard (exact whatever the common rate), fisher (given the total), z (approximate).",
        one_of(TESTS),
    ),
]
SecondSide = Annotated[
    str,
    Word(
        "Where the second value lies, seen from the first, when the claim is false: above, below or either.",
        one_of(tuple(SIDES.values())),
    ),
]
FirstValue = Annotated[Any, Word("True value in the first sample: a rate, a mean, a sigma.", as_typed)]
SecondValue = Annotated[Any, Word("True value in the second sample, in the same unit.", as_typed)]
Ratio = Annotated[float, Word("The second sample as a multiple of the first, such as 1 or 2.", number)]
TwoTest = Annotated[
    str, Word("Test of the kind, where it has several: boschloo, barnard, fisher, z; t, welch.", text)
]
TwoKind = Annotated[str, Word("What is compared: two binomial, two poisson, two means or two spreads.", text)]
FirstUnits = Annotated[
    float, Word("Units of the first sample, the one compared with: any number above 0.", number)
]
SecondUnits = Annotated[float, Word("Units of the second sample: any number above 0.", number)]
FirstMeasured = Annotated[
    int,
    Word(
        "Items to measure of the first sample, the one compared with: a whole number from 2.",
        lambda v, name: read_whole(as_typed(v, name), name, 2),
    ),
]
SecondMeasured = Annotated[
    int,
    Word(
        "Items to measure of the second sample: a whole number from 2.",
        lambda v, name: read_whole(as_typed(v, name), name, 2),
    ),
]
PlanningSigmas = Annotated[
    Any,
    Word('Standard deviation that power is computed with: one for both, or "0.4 and 0.6".', as_typed),
]
MeansTest = Annotated[
    str, Word("welch (sigmas may differ) or t (pooled; assumes equal ones).", one_of(("t", "welch")))
]
