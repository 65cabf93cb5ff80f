"""Double and multiple sampling for each of the three laws of counts."""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Sequence

import numpy as np

from steelyard.core.kind import REQUIRED, Field, register
from steelyard.core.kinds.binomial import BinomialKind
from steelyard.core.kinds.hypergeometric import HypergeometricKind
from steelyard.core.kinds.poisson import PoissonKind
from steelyard.core.numbers import read_whole, write_number
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Plan
from steelyard.core.staged import StagedKind, stage_fields
from steelyard.core.stages import LotStages, Stages, UnitStages, read_amounts, read_sizes
from steelyard.core.walk import Course, Look, LotCourse, along

_LONGEST = 250


class FormulaKind(StagedKind):
    """A staged kind whose power is written as algebra, too, and as a formula of the spreadsheet.

    Both are for one stage or two; with more they would not fit into a cell.
    """

    @abstractmethod
    def term(self, count: str, stage: Sequence[float], before: str) -> str:
        """Return the chance of a count in a stage as algebra; `before` is what the first stage found."""

    @abstractmethod
    def formula(self, plan: Plan, cell: str, counts: Sequence[int]) -> str:
        """Return the power as a formula; `counts` are those that a second stage may reject."""

    def algebra(self, plan: Plan) -> str | None:
        """Return 1 minus the chances of all ways to accept."""
        sizes = plan.design.stages
        if len(sizes) > 2:
            return None
        text, (first, *second) = "1", self.looks(plan)
        if first.accept >= 0:
            text += f" - sum(k=0..{first.accept}) {self.term('k', sizes[:1], '')}"
        for last in second:
            text += f" - sum(k={first.accept + 1}..{first.reject - 1}) {self.term('k', sizes[:1], '')}"
            text += f" sum(j=0..{last.accept}-k) {self.term('j', sizes, 'k')}"
        return text if len(text) <= _LONGEST else None

    def native(self, plan: Plan, cell: str) -> str | None:
        """Return the chance to reject at the first stage, plus the sum over what it leaves open."""
        sizes, looks = plan.design.stages, self.looks(plan)
        if len(sizes) > 2:
            return None
        most = [self.law.most({self.law.amount: size}) for size in sizes]
        open_ = range(looks[0].accept + 1, looks[0].reject) if len(sizes) == 2 else ()
        counts = [k for k in open_ if k <= most[0] and looks[1].reject - k <= most[1]]
        text = self.formula(plan, cell, counts)
        return text if len(text.replace("_xlfn.", "")) <= _LONGEST else None


class StagedBinomialKind(FormulaKind):
    """Plans in stages for items from a process."""

    def term(self, count: str, stage: Sequence[float], before: str) -> str:
        """Return the chance of a count in a stage."""
        del before
        n = write_number(stage[-1])
        return f"C({n},{count}) p^{count} (1-p)^({n}-{count})"

    def formula(self, plan: Plan, cell: str, counts: Sequence[int]) -> str:
        """Return upper tails as lower tails of the good items."""
        (n, *second), looks = plan.design.stages, self.looks(plan)
        text = f"_xlfn.BINOM.DIST({n - looks[0].reject},{n},1-{cell},TRUE)" if looks[0].reject <= n else "0"
        if counts:
            good = array([second[0] - looks[1].reject + k for k in counts])
            text += f"+SUMPRODUCT(_xlfn.BINOM.DIST({array(counts)},{n},{cell},FALSE),"
            text += f"_xlfn.BINOM.DIST({good},{second[0]},1-{cell},TRUE))"
        return text


class StagedPoissonKind(FormulaKind):
    """Plans in stages for defects per unit."""

    def term(self, count: str, stage: Sequence[float], before: str) -> str:
        """Return the chance of a count in a stage."""
        del before
        mean = f"{write_number(stage[-1])} rate"
        return f"exp(-{mean}) ({mean})^{count}/{count}!"

    def formula(self, plan: Plan, cell: str, counts: Sequence[int]) -> str:
        """Return upper tails as a gamma distribution."""
        means, looks = [f"{write_number(size)}*{cell}" for size in plan.design.stages], self.looks(plan)
        text = f"_xlfn.GAMMA.DIST({means[0]},{looks[0].reject},1,TRUE)"
        if counts:
            more = array([looks[1].reject - k for k in counts])
            text += f"+SUMPRODUCT(_xlfn.POISSON.DIST({array(counts)},{means[0]},FALSE),"
            text += f"_xlfn.GAMMA.DIST({means[1]},{more},1,TRUE))"
        return f"IF({cell}=0,0,{text})"


class StagedLotKind(FormulaKind):
    """Plans in stages for a finite lot."""

    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return also the lots, in which rates are counted."""
        return {**super().columns(plans), "lot": np.array([plan.design.lot for plan in plans])}

    def course(self, plan: Plan, rate: Floats, looks: Sequence[Look]) -> Course:
        """Return the counts at their beginning."""
        del looks
        return LotCourse(plan.design.lot, rate)

    def left(self, plan: Plan, rate: Floats, lot: float) -> Floats:
        """Return the defectives left in passed lots: what was found in a sample is not left."""
        course = LotCourse(lot, rate)
        return np.asarray(along(self.all_looks(plan), course, course.left).sum(axis=0))

    def term(self, count: str, stage: Sequence[float], before: str) -> str:
        """Return the chance of a count in a stage, with N items in the lot."""
        n = write_number(stage[-1])
        if not before:
            return f"C(D,{count}) C(N-D,{n}-{count})/C(N,{n})"
        rest = f"N-{write_number(stage[0])}"
        return f"C(D-{before},{count}) C({rest}-D+{before},{n}-{count})/C({rest},{n})"

    def formula(self, plan: Plan, cell: str, counts: Sequence[int]) -> str:
        """Return upper tails as lower tails of the good items, asked for only where these have a value."""
        lot, sizes, looks = plan.design.lot, plan.design.stages, self.looks(plan)
        n, accept, reject = sizes[0], looks[0].accept, looks[0].reject
        text = f"IF({cell}<{reject},0,"
        if reject <= n:
            text += f"_xlfn.HYPGEOM.DIST({n - reject},{n},{lot}-{cell},{lot},TRUE)"
        if counts:
            last, rest = looks[1].reject, lot - n
            good = array([sizes[1] - last + k for k in counts])
            text += (
                f"+IF({cell}<{last},0,SUMPRODUCT(_xlfn.HYPGEOM.DIST({array(counts)},{n},{cell},{lot},FALSE),"
            )
            text += f"_xlfn.HYPGEOM.DIST({good},{sizes[1]},{rest}-{cell}+{array(counts)},{rest},TRUE)))"
        text += ")"
        # With so many defectives every lot fails that the first stage does not pass.
        many = min(lot - plan.design.total + looks[-1].reject, lot - n + reject)
        fails = "1"
        if accept >= 0:
            fails += f"-IF({cell}>{lot - n + accept},0,_xlfn.HYPGEOM.DIST({accept},{n},{cell},{lot},TRUE))"
        return f"IF({cell}>{many:.0f},{fails},{text})"


def array(numbers: Sequence[float]) -> str:
    """Return a constant array of a formula."""
    return "{" + ",".join(write_number(number) for number in numbers) + "}"


_LOT = Field("lot", lambda text, name: read_whole(text, name, 2), default=REQUIRED)

STAGED_BINOMIAL = register(StagedBinomialKind(BinomialKind(), Stages, stage_fields(read_sizes), "items"))
STAGED_POISSON = register(StagedPoissonKind(PoissonKind(), UnitStages, stage_fields(read_amounts), "units"))
STAGED_HYPERGEOMETRIC = register(
    StagedLotKind(HypergeometricKind(), LotStages, (_LOT, *stage_fields(read_sizes)), "items")
)
