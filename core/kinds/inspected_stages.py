"""Plans in stages and sequential plans when inspection errs; see `steelyard.core.kinds.inspected`.

From a process everything goes by the rate that is found. In a finite lot each item is inspected once at most,
so it may be decided beforehand for each whether inspection would condemn it: K of the lot's items, a sum of
two binomial counts. Given K the finds are those of a perfect inspection of a lot with K defectives, whatever
the plan; its chances are averaged over K.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core import tails
from steelyard.core.errors import InvalidValue
from steelyard.core.inspection import (
    InspectedLaw,
    check_misses,
    check_shares,
    found_per_item,
    found_per_unit,
    inspected_grammar,
)
from steelyard.core.kind import register
from steelyard.core.kinds.binomial import BinomialLaw
from steelyard.core.kinds.inspected import OF_DEFECTS, OF_ITEMS, InspectedLotLaw, with_perfect_inspection
from steelyard.core.kinds.poisson import MOST_EXPECTED, PoissonLaw
from steelyard.core.kinds.sequential import SequentialKind
from steelyard.core.kinds.staged import (
    STAGED_BINOMIAL,
    STAGED_HYPERGEOMETRIC,
    STAGED_POISSON,
    StagedBinomialKind,
    StagedLotKind,
    StagedPoissonKind,
)
from steelyard.core.law import CountLaw
from steelyard.core.lines import Truncated
from steelyard.core.parameter import Floats
from steelyard.core.partwise import PartwiseKind
from steelyard.core.plan import Plan
from steelyard.core.staged import StagedKind
from steelyard.core.stages import LotStages, Stages, UnitStages
from steelyard.core.walk import Course, Look, LotCourse, ProcessCourse

MOST_IN_LOT = 10_000
_UNSEEN = 1e-60  # chances of K that no sum notices


@dataclass(frozen=True, slots=True)
class InspectedStages(Stages):
    """Stages of items, with shares of missed defectives and of condemned good items."""

    misses: float
    false_alarms: float = 0.0

    def __post_init__(self) -> None:
        Stages.__post_init__(self)
        check_shares(self.misses, self.false_alarms)


@dataclass(frozen=True, slots=True)
class InspectedUnitStages(UnitStages):
    """Stages of units, with a share of missed defects and false finds per unit."""

    misses: float
    false_alarms: float = 0.0

    def __post_init__(self) -> None:
        UnitStages.__post_init__(self)
        check_misses(self.misses)
        if not 0 <= self.false_alarms <= MOST_EXPECTED / self.total:
            rule = f"expect from 0 to {MOST_EXPECTED:.0f} false finds in {self.total:g} units"
            raise InvalidValue("false-alarms", rule, self.false_alarms)


@dataclass(frozen=True, slots=True)
class InspectedLotStages(LotStages):
    """Stages of items from a lot, with shares of missed defectives and of condemned good items."""

    misses: float
    false_alarms: float = 0.0

    def __post_init__(self) -> None:
        LotStages.__post_init__(self)
        check_shares(self.misses, self.false_alarms)
        if self.lot > MOST_IN_LOT:
            raise InvalidValue("lot", f"be at most {MOST_IN_LOT} where inspection in stages errs", self.lot)


@dataclass(frozen=True, slots=True)
class InspectedTruncated(Truncated):
    """Items inspected one by one, with shares of missed defectives and of condemned good items."""

    misses: float
    false_alarms: float = 0.0

    def __post_init__(self) -> None:
        Truncated.__post_init__(self)
        check_shares(self.misses, self.false_alarms)


class ErringLotCourse(LotCourse):
    """The finds in a lot whose inspection errs.

    Inside, the rates are the numbers K of items that inspection would condemn; every answer is averaged over
    them.
    """

    def __init__(self, lot: int, rate: Floats, misses: float, false_alarms: float) -> None:
        condemned, self.weights = condemned_items(lot, rate, misses, false_alarms)
        super().__init__(lot, condemned)

    def accepted(self, look: Look) -> Floats:
        """Return the chance of being accepted at the next look."""
        return self.weights @ super().accepted(look)

    def rejected(self, look: Look) -> Floats:
        """Return the chance of being rejected there, or on the way there."""
        return self.weights @ super().rejected(look)

    def spent(self, look: Look) -> Floats:
        """Return the expected amount inspected on the way to a look, all the way."""
        return self.weights @ super().spent(look)

    def spent_early(self, look: Look) -> Floats:
        """Return the expected amount inspected on the way to a look, at most until the count rejects."""
        return self.weights @ super().spent_early(look)


def condemned_items(lot: int, rate: Floats, misses: float, false_alarms: float) -> tuple[Floats, Floats]:
    """Return how many items of a lot inspection would condemn, and the chances of that.

    Parameters
    ----------
    lot : int
    rate : ndarray of float, shape (rates,)
        Numbers of defectives.
    misses, false_alarms : float

    Returns
    -------
    condemned : ndarray of float, shape (numbers,)
        All numbers whose chance is not negligible at some rate.
    chances : ndarray of float, shape (rates, numbers)
    """
    parts = []
    for defectives in rate:
        first, caught = _likely(defectives, 1 - misses, misses)
        second, alarmed = _likely(lot - defectives, false_alarms, 1 - false_alarms)
        parts.append((first + second, np.convolve(caught, alarmed)))
    condemned = np.unique(np.concatenate([start + np.arange(len(chances)) for start, chances in parts]))
    weights = np.zeros((rate.size, condemned.size))
    for row, (start, chances) in zip(weights, parts, strict=True):
        place = np.searchsorted(condemned, start)
        row[place : place + len(chances)] = chances
    return condemned.astype(float), weights


def _likely(n: float, p: float, q: float) -> tuple[int, Floats]:
    """Return the first binomial count that is not negligible by Bernstein's inequality, and all chances."""
    mean, log = n * p, -np.log(_UNSEEN)
    reach = log / 3 + np.sqrt(log * log / 9 + 2 * log * n * p * q)
    low, high = max(0, int(mean - reach)), min(int(n), int(mean + reach) + 1)
    counts = np.arange(low, high + 1)
    return low, tails.binomial_pmf(counts, n, p) if p <= q else tails.binomial_pmf(n - counts, n, q)


class ErringProcessKind(PartwiseKind):
    """Plans for a process: it goes by the rate that is found."""

    law: InspectedLaw

    def course(self, plan: Plan, rate: Floats, looks: Sequence[Look]) -> Course:
        """Return the counts at their beginning."""
        found = self.law.found(rate, plan.design.misses, plan.design.false_alarms)
        return ProcessCourse(self.law.law, found, looks)

    def native(self, plan: Plan, cell: str) -> str | None:
        """Return the formula of a perfect inspection, at the rate that is found."""
        return super().native(plan, self.law.line(plan.design, cell))


class ErringStagedKind(StagedKind):
    """Plans in stages.

    Parameters
    ----------
    staged : StagedKind
        The kind with perfect inspection.
    law : CountLaw
        Of what is found in a single sample.
    design : type
        The stages with both errors.
    errors : str
        What the instruction says of them.
    """

    def __init__(self, staged: StagedKind, law: CountLaw, design: Callable[..., Any], errors: str) -> None:
        self.law, self.parameters, self.things = law, staged.parameters, staged.things
        self.grammar = inspected_grammar(staged.grammar, design, errors)

    def remarks(self, plan: Plan) -> list[str]:
        """Return also what the same numbers would mean if inspection were perfect."""
        return [*super().remarks(plan), *with_perfect_inspection(plan)]

    def algebra(self, plan: Plan) -> str | None:
        """Return None: what is found would have to be written into every term."""
        del plan
        return None


class InspectedStagedBinomialKind(ErringProcessKind, ErringStagedKind, StagedBinomialKind):
    """Plans in stages for items from a process, with imperfect inspection."""


class InspectedStagedPoissonKind(ErringProcessKind, ErringStagedKind, StagedPoissonKind):
    """Plans in stages for defects per unit, with imperfect inspection."""


class InspectedStagedLotKind(ErringStagedKind, StagedLotKind):
    """Plans in stages for a finite lot, with imperfect inspection."""

    def course(self, plan: Plan, rate: Floats, looks: Sequence[Look]) -> Course:
        """Return the counts at their beginning."""
        del looks
        design = plan.design
        return ErringLotCourse(design.lot, rate, design.misses, design.false_alarms)

    def native(self, plan: Plan, cell: str) -> str | None:
        """Return None."""
        del plan, cell
        return None


class InspectedSequentialKind(ErringProcessKind, SequentialKind):
    """Sequential plans for items from a process, with imperfect inspection."""

    law = InspectedLaw(BinomialLaw(), found_per_item, "p")
    grammar = inspected_grammar(SequentialKind.grammar, InspectedTruncated, OF_ITEMS)

    def remarks(self, plan: Plan) -> list[str]:
        """Return also what the same lines would mean if inspection were perfect."""
        return [*super().remarks(plan), *with_perfect_inspection(plan)]


_ITEMS, _UNITS = InspectedSequentialKind.law, InspectedLaw(PoissonLaw(), found_per_unit, "rate")
INSPECTED_STAGES = tuple(
    register(kind)
    for kind in (
        InspectedStagedBinomialKind(STAGED_BINOMIAL, _ITEMS, InspectedStages, OF_ITEMS),
        InspectedStagedPoissonKind(STAGED_POISSON, _UNITS, InspectedUnitStages, OF_DEFECTS),
        InspectedStagedLotKind(STAGED_HYPERGEOMETRIC, InspectedLotLaw(), InspectedLotStages, OF_ITEMS),
        InspectedSequentialKind(),
    )
)
