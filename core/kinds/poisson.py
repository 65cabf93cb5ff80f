"""Defects per unit: the Poisson law."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from steelyard.core import algebra, exact, inverses, native, tails
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.law import CountLaw, ExactLaw, UnboundedCountLaw, running_means
from steelyard.core.numbers import read_number, typed
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import Claim, Reject
from steelyard.core.priors import GammaPrior, Prior
from steelyard.core.threshold import CountKind, threshold_fields

MOST_UNITS = 1e9
MOST_EXPECTED = 1e9


@dataclass(frozen=True, slots=True)
class Extent:
    """`units` inspected: any positive number of items, metres or hours."""

    units: float

    def __post_init__(self) -> None:
        if not 0 < self.units <= MOST_UNITS:
            raise InvalidValue("units", f"be greater than 0 and at most {MOST_UNITS:.0f}", self.units)


class PoissonLaw(UnboundedCountLaw):
    """Defects found in `units` at a mean of `rate` defects per unit."""

    statistic, amount, divisible = "x", "units", True

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X <= x)."""
        return tails.poisson_at_most(x, columns["units"] * rates[0])

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X >= x)."""
        return tails.poisson_at_least(x, columns["units"] * rates[0])

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X = x)."""
        return tails.poisson_pmf(x, columns["units"] * rates[0])

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the Poisson law in enclosures."""
        return exact.PoissonExact(typed(row["units"]) * rate)

    def tail_rate(self, x: float, columns: Columns, end: str, prob: float) -> float:
        """Return about the rate at which a tail has a probability."""
        return inverses.poisson_mean(x, end, prob) / float(columns["units"])

    def even_rate(self, x: float, others: Floats, columns: Columns) -> Floats:
        """Return the rates with equal chances: the mean is the geometric mean of k between the two."""
        return np.exp(running_means(x, others, np.log)) / columns["units"]

    def variance(self, columns: Columns, rate: float) -> float:
        """Return the mean."""
        return float(columns["units"]) * rate

    def valley(self, columns: Columns, low: float, high: float) -> float:
        """Return the rate at which the counts just outside the two ends are equally probable."""
        return float(self.even_rate(low, np.array([high - 1]), columns)[0])

    def largest(self, columns: Columns) -> Any:
        """Return the most units of one plan."""
        del columns
        return MOST_UNITS

    def prior(self, design: Any, a: float, b: float) -> Prior:
        """Return a gamma law of the defects per unit."""
        del design
        return GammaPrior(a, b)

    def algebra(self, design: Any, rule: Reject) -> str:
        """Return the power as a function of the rate."""
        return algebra.poisson_power(design.units, rule)

    def native(self, design: Any, rule: Reject, cell: str) -> str:
        """Return a formula for the power at the defects per unit in a cell."""
        return native.poisson_native(design.units, rule, cell)


class PoissonKind(CountKind):
    """Single plans for defects per unit."""

    law: CountLaw = PoissonLaw()
    parameters = (Parameter("rate", "defects per unit", "defects per unit, 0 or more", 0.0, math.inf),)
    grammar = Grammar(
        kind="poisson",
        head="poisson",
        marker="units",
        design=Extent,
        fields=(Field("units", read_number, default=REQUIRED),),
        order=("units", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="defects per unit",
            sample="Inspect {units} units chosen at random and count every defect.",
            found="defects",
            assumptions=(
                "The units are chosen at random.",
                "Defects occur independently of each other, at one rate per unit.",
                "Inspection finds every defect and counts none that is not there.",
            ),
        ),
        extent="units",
        **threshold_fields("x", whole=True),
    )

    def check_claim(self, claim: Claim, design: Any) -> None:
        """Refuse claims that are always true, and counts too large to be told apart."""
        super().check_claim(claim, design)
        if claim.value * design.units > MOST_EXPECTED:
            rule = f"expect at most {MOST_EXPECTED:.0f} defects in {design.units:g} units"
            raise InvalidValue("claim", rule, str(claim))


POISSON = register(PoissonKind())
