"""Two samples of items, and whether their defect rates differ.

Power and size are exact, by enumeration of all pairs of counts; see `steelyard.core.two_tables`. Relative
error of power at most 1e-10 for rates from 1e-6 to 1 - 1e-6 and powers from 1e-250.
"""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from steelyard.core import two_tables
from steelyard.core.comparing import (
    ComparingKind,
    Derived,
    Pairing,
    alpha_of,
    derived_fields,
    read_pair,
    read_versus,
    side_of,
    write_pair,
)
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import REQUIRED, Field, Grammar, Wording, register
from steelyard.core.numbers import read_choice, read_whole, write_number
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import Claim, Plan
from steelyard.core.pmf import binomial_pmf
from steelyard.core.two_tables import MOST_COMPARED, TESTS, Table

_SLACK = 1e-9  # more than the rounding of a sum of chances
_UNIT = "proportion between 0 and 1"
_TOLD = {
    "fisher": "Test: Fisher's exact test, given the total found; its true size is mostly well below alpha.",
    "boschloo": "Test: Boschloo's exact test: pairs in the order of Fisher's p-value, as far as the true "
    "size stays within alpha, whatever the common rate.",
    "z": "Test: pooled z against the normal law, an approximation: the size said here is its true one, "
    "and may exceed alpha.",
    "barnard": "Test: pairs in the order of the pooled z, as far as the true size stays within alpha, "
    "whatever the common rate.",
}
_SPLITS = {
    "half": "Two-sided: the claim is rejected where either one-sided test at alpha/2 rejects.",
    "rarest": "Two-sided: the pairs of both sides stand in one order, by how unlikely they are.",
}


@dataclass(frozen=True, slots=True)
class TwoItems:
    """`n` items of either sample, each defective or not, and the test that compares them."""

    n: tuple[int, int]
    test: str

    def __post_init__(self) -> None:
        if not all(1 <= items <= MOST_COMPARED for items in self.n):
            rule = f"name two whole numbers from 1 to {MOST_COMPARED}"
            raise InvalidValue("n", rule, write_pair(self.n))


class TwoBinomialKind(ComparingKind):
    """Tests of two defect rates."""

    most, test = MOST_COMPARED, "boschloo"
    parameters = (
        Parameter("p1", "defect rate of the first sample", _UNIT, 0.0, 1.0),
        Parameter("p2", "defect rate of the second sample", _UNIT, 0.0, 1.0),
    )
    grammar = Grammar(
        kind="two binomial",
        head="two binomial",
        marker="n",
        design=TwoItems,
        fields=(
            Field(
                "n",
                read_pair(lambda text, name: read_whole(text, name, 1, MOST_COMPARED), "50 and 60"),
                write_pair,
                REQUIRED,
            ),
            Field("test", lambda text, name: read_choice(text, name, TESTS), str, REQUIRED),
        ),
        order=("n", "claim", "alpha", "split", "test", "verdict"),
        wording=Wording(
            title="defect rates of two samples compared",
            sample="Inspect {n} items, drawn at random from the two, and count the defectives of either.",
            found="defectives",
            assumptions=(
                "Every item is drawn at random and has the same chance of being chosen.",
                "Items are defective independently of each other, at one rate within each sample.",
                "The samples are independent of each other: no item of one is matched with one of the other.",
                "Inspection is the same for both, and inspectors do not know which sample an item is from.",
            ),
        ),
        **derived_fields(),
    )

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return for each plan the table of pairs that reject."""
        tables = np.empty(len(plans), dtype=object)
        for place, plan in enumerate(plans):
            tables[place] = _Rejected(rejected(plan))
        return {"rejected": tables, "pass": np.array([plan.verdict == "pass" for plan in plans])}

    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the sum over all pairs that reject."""
        return _chance(columns["rejected"], lambda one: one.table, rates)

    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the sum over all pairs that do not reject."""
        return _chance(columns["rejected"], lambda one: ~one.table, rates)

    def critical_rule(self, design: TwoItems, claim: Claim, alpha: float, split: str) -> Derived:
        """Return the rule, which is not written.

        Raises
        ------
        InvalidValue
            When no pair of counts would be rejected, or the test has no such split.
        """
        if split not in _SPLITS or (split == "rarest" and design.test == "z"):
            rule = "be half for the test z" if design.test == "z" else "be half or rarest"
            raise InvalidValue("split", rule, split)
        if not two_tables.rejected(design.test, *design.n, claim.side, alpha, split).any():
            rule = f"be enough that some result rejects {claim} at alpha {write_number(alpha)}"
            raise InvalidValue("n", rule, write_pair(design.n))
        return Derived()

    def smallest_first(self, wanted: Pairing) -> int | None:
        """Return the least items of the first sample: the power is a saw, so one after the other is tried.

        No test that keeps alpha beats the best one of two simple hypotheses, whose power only grows; so the
        search starts where that reaches the target. The test z need not keep alpha.
        """
        last = wanted.sized(wanted.most).n
        middle = sum(n * rate for n, rate in zip(last, wanted.truth, strict=True)) / sum(last)

        def possible(items: int) -> bool:
            design = wanted.sized(items)
            if design.test == "z":
                return True
            first, second = design.n
            best = two_tables.best_power(first, second, middle, wanted.truth, wanted.alpha)
            return best >= wanted.power * (1 - _SLACK)

        counts = range(1, wanted.most + 1)
        start = bisect_left(counts, True, key=possible)
        return next((first for first in counts[start:] if self.reaches(wanted, first)), None)

    def size(self, plan: Plan) -> float:
        """Return the greatest power over all rates that both samples may share."""
        return two_tables.size(rejected(plan))

    def read_observed(self, value: Any, plan: Plan) -> tuple[int, int]:
        """Return two observed counts, such as ``3 vs 9``."""
        found = read_versus(value, read_whole, "3 vs 9")
        for count, items in zip(found, plan.design.n, strict=True):
            read_whole(count, "observed", 0, items)
        return found

    def outcome(self, plan: Plan, observed: tuple[int, int]) -> bool:
        """Tell whether the pair rejects the claim."""
        return bool(rejected(plan)[observed])

    def p_value(self, plan: Plan, observed: tuple[int, int]) -> float:
        """Return the p-value of the pair."""
        first, second = plan.design.n
        side = side_of(plan)
        return two_tables.p_value(plan.design.test, first, second, side, plan.split, observed)

    def borders(self, plan: Plan) -> list[tuple[int, int | None, int | None]]:
        """Return, for each first count, up to and from which second count the claim is rejected."""
        table, rows = rejected(plan), []
        for count, row in enumerate(table):
            share = count / plan.design.n[0] * plan.design.n[1]
            places = np.flatnonzero(row)
            low, high = places[places < share], places[places >= share]
            rows.append((count, int(low.max()) if low.size else None, int(high.min()) if high.size else None))
        return rows

    def region(self, plan: Plan) -> str:
        """Return the first lines of the border of the region."""
        return _told(self.borders(plan), lambda count, ends: f"x1 {count}: x2 {ends}", "≤", "≥", "; ")

    def told(self, plan: Plan) -> str:
        """Return the first lines of the border of the region, in words."""
        text = _told(self.borders(plan), lambda count, ends: f"{ends} after {count}", "≤", "≥", ", ", 100)
        return f"pairs of counts such as, in the second sample, {text} in the first"

    def remarks(self, plan: Plan) -> list[str]:
        """Say which test it is, and what it never rejects."""
        told = [_TOLD[plan.design.test]]
        if side_of(plan) == "either":
            told.append(_SPLITS[plan.split])
        return [*told, "Where both samples show no defective, or nothing else, the claim is not rejected."]


@dataclass(frozen=True, slots=True, eq=False)
class _Rejected:
    """A table of pairs, as one thing in an array."""

    table: Table


def rejected(plan: Plan) -> Table:
    """Return which pairs of counts reject, shape ``(first + 1, second + 1)``."""
    design = plan.design
    return two_tables.rejected(design.test, *design.n, side_of(plan), alpha_of(plan), plan.split)


def _chance(tables: NDArray[Any], chosen: Any, rates: tuple[Floats, ...]) -> Floats:
    """Return the chance of the chosen pairs; tables and rates broadcast."""
    tables, first, second = np.broadcast_arrays(tables, *rates)
    found = np.empty(tables.shape)
    for one in {id(table): table for table in tables.ravel()}.values():
        places = np.equal(tables, one)
        table = chosen(one)
        chances = [
            binomial_pmf(np.arange(float(items)), items - 1, rate[places][:, None])
            for items, rate in zip(table.shape, (first, second), strict=True)
        ]
        found[places] = ((chances[0] @ table.astype(float)) * chances[1]).sum(axis=1)
    return np.minimum(found, 1.0)


def _told(
    borders: list[tuple[int, int | None, int | None]],
    row: Any,
    low: str,
    high: str,
    between: str,
    width: int = 200,
) -> str:
    """Return as many lines of a border as fit."""
    lines: list[str] = []
    for count, most, least in borders:
        ends = [f"{sign} {end}" for sign, end in ((low, most), (high, least)) if end is not None]
        if not ends:
            continue
        if len(between.join(lines)) > width:
            return f"{between.join(lines)}{between}…"
        lines.append(row(count, " or ".join(ends)))
    return between.join(lines)


TWO_BINOMIAL = register(TwoBinomialKind())
