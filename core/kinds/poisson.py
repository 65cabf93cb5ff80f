"""Defects per unit: the Poisson law."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from steelyard.core import tails
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, register
from steelyard.core.law import Law
from steelyard.core.numbers import read_number
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.threshold import ThresholdKind, threshold_fields

MOST_UNITS = 1e9


@dataclass(frozen=True, slots=True)
class Extent:
    """`units` inspected: any positive number of items, metres, hours …"""

    units: float

    def __post_init__(self) -> None:
        if not 0 < self.units <= MOST_UNITS:
            raise InvalidValue("units", f"be greater than 0 and at most {MOST_UNITS:.0f}", self.units)


class PoissonLaw(Law):
    """Defects found in `units` at a mean of `rate` defects per unit."""

    statistic, step = "x", 1

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X <= x)."""
        return tails.poisson_at_most(x, columns["units"] * rates[0])

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X >= x)."""
        return tails.poisson_at_least(x, columns["units"] * rates[0])

    def support(self, design: Extent) -> tuple[float, float]:
        """Return 0 and infinity."""
        return 0, math.inf


class PoissonKind(ThresholdKind):
    """Single plans for defects per unit."""

    law = PoissonLaw()
    parameters = (Parameter("rate", "defects per unit", "defects per unit, 0 or more", 0.0, math.inf),)
    grammar = Grammar(
        kind="poisson",
        head="poisson",
        marker="units",
        design=Extent,
        fields=(Field("units", read_number, default=REQUIRED),),
        order=("units", "claim", "alpha", "split", "reject", "verdict"),
        **threshold_fields("x", whole=True),
    )


POISSON = register(PoissonKind())
