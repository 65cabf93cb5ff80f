"""Defectives in a finite lot: the hypergeometric law. The parameter is D, a whole number of defectives."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from steelyard.core import algebra, exact, limits, native, tails
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.law import CountLaw, ExactLaw
from steelyard.core.numbers import read_number, read_whole, typed
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import Claim, Plan, Reject, split_claim
from steelyard.core.priors import LotPrior, Prior
from steelyard.core.splits import Truth, first_whole
from steelyard.core.threshold import CountKind, threshold_fields

MOST_ITEMS = 1_000_000


@dataclass(frozen=True, slots=True)
class LotSample:
    """`n` items drawn without replacement from a lot of `lot` items."""

    lot: int
    n: int

    def __post_init__(self) -> None:
        if not 2 <= self.lot <= MOST_ITEMS:
            raise InvalidValue("lot", f"be a whole number from 2 to {MOST_ITEMS}", self.lot)
        if not 1 <= self.n <= self.lot:
            raise InvalidValue("n", f"be a whole number from 1 to the lot's {self.lot}", self.n)


def is_proportion(value: Any, number: float) -> bool:
    """Tell a proportion of the lot from a count: a bare 1 is one defective, ``1%`` a proportion."""
    return 0 < number < 1 or (isinstance(value, str) and value.strip().lower().endswith(("%", "ppm")))


class Defectives(Parameter):
    """D, the defectives in the lot, also asked for as a proportion of it."""

    __slots__ = ()

    def read(self, value: Any, design: LotSample | None = None) -> float:
        """Return D; a proportion must give a whole number of items of the lot.

        Raises
        ------
        InvalidValue
            Naming both neighbours where the proportion lies between two whole numbers.
        """
        number = read_number(value, self.symbol)
        if design is None:
            return super().read(value)
        lot = design.lot
        if not is_proportion(value, number):
            if number.is_integer() and 0 <= number <= lot:
                return number
            raise InvalidValue("D", f"be a whole number from 0 to {lot}, or a proportion of the lot", value)
        if not 0 <= number <= 1:
            raise InvalidValue("rate", "lie between 0 and 1", value)
        count = round(number * lot)
        if count / lot == number:
            return float(count)
        near = math.floor(typed(number) * lot)
        hint = f"neighbours: D = {near} is {near / lot:.6g}, D = {near + 1} is {(near + 1) / lot:.6g}"
        raise InvalidValue("rate", f"give a whole number of items in a lot of {lot}", value, hint)

    def claimed(self, value: Any, relation: str, design: LotSample | None = None) -> float:
        """Return the claim's D: ``p<=a`` becomes floor(lot a), ``p>=a`` becomes ceil(lot a)."""
        number = read_number(value, self.symbol)
        if design is None or relation == "=" or not is_proportion(value, number):
            return self.read(value, design)
        exact = typed(number) * design.lot
        return self.read(float(math.floor(exact) if relation == "<=" else math.ceil(exact)), design)

    def reach(self, design: Any) -> tuple[float, float]:
        """Return 0 and the lot."""
        return 0.0, float(design.lot)

    def span(self, columns: Columns) -> tuple[Floats, Floats]:
        """Return 0 and the lot."""
        return np.zeros(()), np.asarray(columns["lot"], dtype=float)

    def convert(self, values: Floats, columns: Columns) -> Floats:
        """Return D for queried values, NaN where a value is no whole number of items of the lot."""
        lot = columns["lot"]
        if ((values == np.floor(values)) & (values >= 0) & (values <= lot)).all():
            return values
        counts = np.rint(values * lot)
        share = (values > 0) & (values < 1)
        matching = share & (counts / lot == values)
        whole = (values == np.floor(values)) & (values >= 0) & (values <= lot)
        return np.where(matching, counts, np.where(whole, values, np.nan))


class HypergeometricLaw(CountLaw):
    """Defectives among n items drawn from a lot with D defectives."""

    statistic, amount = "x", "n"

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X <= x)."""
        return tails.hypergeometric_at_most(x, columns["lot"], rates[0], columns["n"])

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X >= x)."""
        return tails.hypergeometric_at_least(x, columns["lot"], rates[0], columns["n"])

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return P(X = x)."""
        return tails.hypergeometric_pmf(x, columns["lot"], rates[0], columns["n"])

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the hypergeometric law in rationals."""
        return exact.HypergeometricExact(int(row["lot"]), int(rate), int(row["n"]))

    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return a limit for D, a whole number."""
        reach = (x, x + float(row["lot"] - row["n"]))
        return limits.lot_limit(self, row, x, end, miss, split, reach)

    def valley(self, columns: Columns, low: float, high: float) -> float:
        """Return the first D from which one more defective raises the power.

        It matters only where all items but that one hold `low` or ``high - 1`` defectives in the sample.
        """
        others = {"lot": columns["lot"] - 1, "n": columns["n"] - 1}

        def rises(defectives: Floats) -> Truth:
            gain, loss = (self.exactly(x, others, defectives) for x in (high - 1, low))
            return np.asarray(gain >= loss)

        return float(first_whole(rises, np.asarray(high - 1)))

    def largest(self, columns: Columns) -> Any:
        """Return the lot."""
        return columns["lot"]

    def share(self, columns: Columns, rate: Floats) -> Floats:
        """Return the proportion of defectives in the lot."""
        return rate / columns["lot"]

    def pace(self, x: Any, columns: Columns, rate: Floats) -> Floats:
        """Return the proportion of defectives in what is left of the lot."""
        proportion: Floats = np.maximum(rate - x, 0.0) / np.maximum(columns["lot"] - columns["n"], 1.0)
        return proportion

    def prior(self, design: Any, a: float, b: float) -> Prior:
        """Return a beta-binomial law of the defectives in the lot."""
        return LotPrior(a, b, design.lot)

    def algebra(self, design: Any, rule: Reject) -> str:
        """Return the power as a function of D."""
        return algebra.lot_power(design.lot, design.n, rule)

    def native(self, design: Any, rule: Reject, cell: str) -> str | None:
        """Return a formula for the power at the number of defectives in a cell."""
        return native.lot_native(design.lot, design.n, rule, cell)


class HypergeometricKind(CountKind):
    """Single plans for a finite lot."""

    law: CountLaw = HypergeometricLaw()

    parameters = (
        Defectives("D", "defectives in the lot", "items per lot", 0.0, math.inf, aliases=("p",), whole=True),
    )
    grammar = Grammar(
        kind="hypergeometric",
        head="hypergeometric",
        marker="n",
        design=LotSample,
        fields=(
            Field("lot", lambda text, name: read_whole(text, name, 2, MOST_ITEMS), default=REQUIRED),
            Field("n", lambda text, name: read_whole(text, name, 1, MOST_ITEMS), default=REQUIRED),
        ),
        order=("lot", "n", "claim", "alpha", "split", "reject", "verdict"),
        wording=Wording(
            title="defectives in a finite lot",
            sample="Draw {n} items at random from the lot of {lot}, put none back, and count the defectives.",
            found="defectives",
            assumptions=(
                "Every item of the lot has the same chance of being drawn.",
                "The lot has the stated number of items.",
                "Inspection finds every defective and condemns no good item.",
            ),
        ),
        extra="lot",
        **threshold_fields("x", whole=True),
    )

    def left(self, plan: Plan, rate: Floats, lot: float) -> Floats:
        """Return D times the chance that the lot passes and one certain defective is not in the sample.

        The others then are ``D - 1`` defectives in a lot with one item less.
        """
        if plan.design.n == lot:
            return np.zeros(rate.shape)
        others = {**self.columns([plan]), "lot": np.array([lot - 1])}
        passing = self.passing(others, np.maximum(rate - 1, 0))
        return np.asarray(rate * (1 - plan.design.n / lot) * passing)

    def read_claim(self, text: str, design: Any) -> Claim:
        """Return the claim on D; ``D<=8`` names a count, ``p<=1%`` a proportion of the lot."""
        symbol, _, value = split_claim(text)
        number = read_number(value, symbol)
        if symbol.lower() == "d" and is_proportion(value, number) and not value.strip().endswith("%"):
            raise InvalidValue("claim", "name a whole number of defectives, or a rate as p<=1%", text)
        return super().read_claim(text, design)


HYPERGEOMETRIC = register(HypergeometricKind())
