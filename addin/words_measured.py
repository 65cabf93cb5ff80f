"""Words for what is measured: means, standard deviations, limits, lives."""

from __future__ import annotations

from typing import Annotated, Any

from steelyard.addin.catalogue import Word
from steelyard.addin.words import as_typed, number, one_of
from steelyard.core.life import STOPS
from steelyard.core.measuring import MEASURES
from steelyard.core.numbers import read_whole

Measured = Annotated[
    int,
    Word("Items to measure: a whole number.", lambda v, name: read_whole(as_typed(v, name), name, 1)),
]
MeanClaim = Annotated[Any, Word("What is claimed of the mean: mean>=500, mean<=500 or mean=500.", as_typed)]
SigmaClaim = Annotated[
    Any, Word("What is claimed of the standard deviation: sigma<=0.4, or the bare number.", as_typed)
]
Sigma = Annotated[float, Word("The known standard deviation of single values.", number)]
PlanningSigma = Annotated[
    float, Word("The standard deviation that power is computed with: a guess, unlike a known sigma.", number)
]
FractionClaim = Annotated[
    Any,
    Word("What is claimed of the fraction outside the limits: 1% or p<=1%; p>=5% to show less.", as_typed),
]
LowerLimit = Annotated[float, Word("The lower limit, in the unit of the measurement.", number)]
UpperLimit = Annotated[float, Word("The upper limit, in the unit of the measurement.", number)]
KnownSigma = Annotated[
    float, Word("The known standard deviation, where it is not taken from the sample.", number)
]
Figures = Annotated[Any, Word('What was measured: "mean 499.7 s 0.31".', as_typed)]
Several = Annotated[
    int, Word("Items to measure: a whole number from 2.", lambda v, n: read_whole(as_typed(v, n), n, 2))
]
CapabilityTarget = Annotated[
    float, Word("The Ppk to be shown, such as 1.33; or the coverage, such as 95%.", number)
]
MeasureName = Annotated[str, Word("What the target is: ppk or coverage.", one_of(MEASURES))]
LifeClaim = Annotated[
    Any,
    Word("Claimed mean life: life<=1000 to show a longer one, life>=1000 to catch a shorter one.", as_typed),
]
TestAmount = Annotated[
    float, Word("Total time on test; or failures to stop at, or time on the clock, as stop says.", number)
]
Stop = Annotated[str, Word("What ends the test: time (total), failures, or clock.", one_of(STOPS))]
UnitsOnTest = Annotated[
    int, Word("Units on test, for a fixed clock.", lambda v, n: read_whole(as_typed(v, n), n, 1))
]
AllowedFailures = Annotated[
    int,
    Word(
        "Failures that shall still show a longer life, where the amount is left out.",
        lambda v, n: read_whole(as_typed(v, n), n),
    ),
]
