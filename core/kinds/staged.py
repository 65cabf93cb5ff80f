"""Double and multiple sampling for each of the three laws of counts."""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Sequence

import numpy as np

from steelyard.core.kind import REQUIRED, Field, register
from steelyard.core.kinds.binomial import BinomialKind
from steelyard.core.kinds.hypergeometric import HypergeometricKind
from steelyard.core.kinds.poisson import PoissonKind
from steelyard.core.native import MOST_DRAWN, binomial_native, lot_native, operand, poisson_native
from steelyard.core.numbers import read_whole, write_number
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Plan, Reject
from steelyard.core.staged import StagedKind, stage_fields
from steelyard.core.stages import LotStages, Stages, UnitStages, read_amounts, read_sizes
from steelyard.core.walk import Course, Look, LotCourse, along

_LONGEST = 254


class FormulaKind(StagedKind):
    """A staged kind whose power is written as algebra, too, and as a formula of the spreadsheet.

    Both are for one stage or two; with more they would not fit into a cell.
    """

    @abstractmethod
    def term(self, plan: Plan, count: str, stage: int) -> str:
        """Return the chance of a count in the first or second stage (0 or 1); the first has found k."""

    @abstractmethod
    def formula(self, plan: Plan, cell: str, counts: Sequence[int]) -> str | None:
        """Return the power as a formula; `counts` are those that a second stage may reject."""

    def algebra(self, plan: Plan) -> str | None:
        """Return 1 minus the chances of all ways to accept."""
        sizes = plan.design.stages
        if len(sizes) > 2:
            return None
        text, (first, *second) = "1", self.looks(plan)
        once = self.term(plan, "k", 0)
        if first.accept >= 0:
            text += f" - sum({once}, k=0..{first.accept})"
        for last in second:
            twice = f"sum({self.term(plan, 'j', 1)}, j=0..{last.accept}-k)"
            text += f" - sum({once} {twice}, k={first.accept + 1}..{first.reject - 1})"
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
        return text if text and len(text.replace("_xlfn.", "")) <= _LONGEST else None


class StagedBinomialKind(FormulaKind):
    """Plans in stages for items from a process."""

    def term(self, plan: Plan, count: str, stage: int) -> str:
        """Return the chance of a count in a stage."""
        n = plan.design.stages[stage]
        return f"C({n},{count}) p^{count} (1-p)^({n}-{count})"

    def formula(self, plan: Plan, cell: str, counts: Sequence[int]) -> str:
        """Return upper tails as beta distributions."""
        (n, *second), looks, rate = plan.design.stages, self.looks(plan), operand(cell)
        text = binomial_native(n, Reject(None, looks[0].reject), cell) if looks[0].reject <= n else "0"
        if counts:
            more = [looks[1].reject - k for k in counts]
            good = [second[0] - y + 1 for y in more]
            text += f"+SUMPRODUCT(_xlfn.BINOM.DIST({array(counts)},{n},{rate},FALSE),"
            text += f"_xlfn.BETA.DIST({rate},{array(more)},{array(good)},TRUE))"
        return text


class StagedPoissonKind(FormulaKind):
    """Plans in stages for defects per unit."""

    def term(self, plan: Plan, count: str, stage: int) -> str:
        """Return the chance of a count in a stage."""
        mean = f"{write_number(plan.design.stages[stage])} rate"
        return f"exp(-{mean}) ({mean})^{count}/{count}!"

    def formula(self, plan: Plan, cell: str, counts: Sequence[int]) -> str:
        """Return upper tails as a gamma distribution."""
        sizes, looks, rate = plan.design.stages, self.looks(plan), operand(cell)
        text = poisson_native(sizes[0], Reject(None, looks[0].reject), cell)
        if not counts:
            return text
        means, more = (
            [f"{write_number(size)}*{rate}" for size in sizes],
            [looks[1].reject - k for k in counts],
        )
        text += f"+SUMPRODUCT(_xlfn.POISSON.DIST({array(counts)},{means[0]},FALSE),"
        return f"IF({rate}=0,0,{text}_xlfn.GAMMA.DIST({means[1]},{array(more)},1,TRUE)))"


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

    def term(self, plan: Plan, count: str, stage: int) -> str:
        """Return the chance of a count in a stage."""
        lot, sizes = plan.design.lot, plan.design.stages
        if stage == 0:
            return f"C(D,{count}) C({lot}-D,{sizes[0]}-{count})/C({lot},{sizes[0]})"
        rest, n = lot - sizes[0], sizes[1]
        return f"C(D-k,{count}) C({rest}-D+k,{n}-{count})/C({rest},{n})"

    def formula(self, plan: Plan, cell: str, counts: Sequence[int]) -> str | None:
        """Return upper tails as lower tails of the good items, asked for only where these have a value."""
        lot, sizes, looks, found = plan.design.lot, plan.design.stages, self.looks(plan), operand(cell)
        if max(sizes) > MOST_DRAWN:
            return None
        n, accept, reject = sizes[0], looks[0].accept, looks[0].reject
        if not counts:
            return lot_native(lot, n, Reject(None, reject), cell)
        (_, last), rest, good = plan.rule.certain, lot - n, [sizes[1] - looks[1].reject + k for k in counts]
        fails = f"_xlfn.HYPGEOM.DIST({n - reject},{n},{lot}-{found},{lot},TRUE)" if reject <= n else "0"
        fails += (
            f"+IF({found}<{last},0,SUMPRODUCT(_xlfn.HYPGEOM.DIST({array(counts)},{n},{found},{lot},FALSE),"
        )
        fails += f"_xlfn.HYPGEOM.DIST({array(good)},{sizes[1]},{rest}-{found}+{array(counts)},{rest},TRUE)))"
        # With more defectives than `many` every lot fails that the first stage does not pass.
        many, most = min(rest - sizes[1] + last, rest + reject), rest + accept
        passes = f"-IF({found}>{most},0,_xlfn.HYPGEOM.DIST({accept},{n},{found},{lot},TRUE))"
        return f"IF({found}>{many},1{passes if accept >= 0 else ''},IF({found}<{reject},0,{fails}))"


def array(numbers: Sequence[float]) -> str:
    """Return a constant array of a formula."""
    return "{" + ",".join(write_number(number) for number in numbers) + "}"


_LOT = Field("lot", lambda text, name: read_whole(text, name, 2), default=REQUIRED)

STAGED_BINOMIAL = register(StagedBinomialKind(BinomialKind(), Stages, stage_fields(read_sizes), "items"))
STAGED_POISSON = register(StagedPoissonKind(PoissonKind(), UnitStages, stage_fields(read_amounts), "units"))
STAGED_HYPERGEOMETRIC = register(
    StagedLotKind(HypergeometricKind(), LotStages, (_LOT, *stage_fields(read_sizes)), "items")
)
