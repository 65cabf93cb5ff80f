"""Plans for counts whose defects come in clusters; the laws are those of `steelyard.core.clusters`."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass
from typing import Any

from steelyard.core.clusters import MOST_ITEMS, ClusteredDefectsLaw, ClusteredItemsLaw, excess
from steelyard.core.errors import InvalidValue
from steelyard.core.forms import form_of, plain
from steelyard.core.kind import REQUIRED, Field, Grammar, register
from steelyard.core.kinds.binomial import BinomialKind, Items
from steelyard.core.kinds.poisson import Extent, PoissonKind
from steelyard.core.law import CountLaw
from steelyard.core.need import Need
from steelyard.core.numbers import read_number, read_whole
from steelyard.core.parameter import show_rate
from steelyard.core.plan import Claim, Plan, Reject
from steelyard.core.questions import size
from steelyard.core.regions import design_row
from steelyard.core.requirements import one_sided_amount
from steelyard.core.threshold import CountKind
from steelyard.core.two_sided import two_sided_amount

LEAST_CORRELATION = 1e-6  # below it, and above 0, the functions lose digits

_CORRELATION = Field("correlation", read_number, default=REQUIRED)
_ITEMS = Field("cluster", lambda text, name: read_whole(text, name, 1, MOST_ITEMS), default=REQUIRED)
_UNITS = Field("cluster", read_number, default=REQUIRED)


@dataclass(frozen=True, slots=True)
class ClusteredItems(Items):
    """`n` items inspected that come in clusters of `cluster`, tied by an intraclass correlation."""

    cluster: int
    correlation: float

    def __post_init__(self) -> None:
        Items.__post_init__(self)
        if self.n > MOST_ITEMS:
            raise InvalidValue("n", f"be at most {MOST_ITEMS} where defectives come in clusters", self.n)
        if not 1 <= self.cluster <= MOST_ITEMS:
            raise InvalidValue("cluster", f"be a whole number from 1 to {MOST_ITEMS}", self.cluster)
        check_correlation(self.correlation)


@dataclass(frozen=True, slots=True)
class ClusteredExtent(Extent):
    """`units` inspected that come in clusters of `cluster` units, tied by an intraclass correlation."""

    cluster: float
    correlation: float

    def __post_init__(self) -> None:
        Extent.__post_init__(self)
        if not self.cluster > 0:
            raise InvalidValue("cluster", "be greater than 0", self.cluster)
        check_correlation(self.correlation)


def check_correlation(correlation: float) -> None:
    """Refuse what is no intraclass correlation of clusters: 0, or from a millionth to below 1."""
    if correlation != 0 and not LEAST_CORRELATION <= correlation < 1:
        rule = f"be 0, or at least {LEAST_CORRELATION:g} and less than 1"
        raise InvalidValue("correlation", rule, correlation)


def _clustered(grammar: Grammar, design: Any, cluster: Field, tied: str) -> Grammar:
    wording = dataclasses.replace(
        grammar.wording,
        title=f"{grammar.wording.title}, in clusters",
        sample=f"{grammar.wording.sample} They are taken in clusters of {{cluster}}, each of things made "
        "together; within a cluster the correlation is {correlation}.",
        assumptions=tuple(tied if "independently" in text else text for text in grammar.wording.assumptions),
    )
    return form_of(grammar, "clustered", design, (cluster, _CORRELATION), wording)


class ClusteredKind(CountKind):
    """What both kinds have in common."""

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Reject:
        """Return the largest region that keeps alpha."""
        _check_split(split)
        return super().critical_rule(design, claim, alpha, split)

    def verify(self, plan: Plan) -> None:
        """Refuse, beside what all kinds refuse, a split that the law has no answer for."""
        _check_split(plan.split)
        super().verify(plan)

    def smallest_amount(self, need: Need, lasting: bool) -> float:
        """Return the first or the lasting amount that meets a need; NaN beyond the largest amount."""
        _check_split(need.split)
        find = two_sided_amount if need.claim.side == "either" else one_sided_amount
        return find(self.law_of(need.design), design_row(self, need.design), need, lasting)

    def law_of(self, design: Any) -> CountLaw:
        """Return the law of all designs with the same clusters."""
        raise NotImplementedError

    def remarks(self, plan: Plan) -> list[str]:
        """Return what the same counts would mean without clusters."""
        if plan.claim is None:
            return []
        free = show_rate(size(plain(plan)))
        return [f"Were there no clusters, a true claim would be rejected with probability {free} at most."]


def _check_split(split: str) -> None:
    if split == "rarest":
        raise InvalidValue("split", "be half or nearest where defects come in clusters", split)


class ClusteredBinomialKind(ClusteredKind, BinomialKind):
    """Single plans for the rate of defectives that come in clusters."""

    law = ClusteredItemsLaw()
    grammar = _clustered(
        BinomialKind.grammar,
        ClusteredItems,
        _ITEMS,
        "Clusters are independent; within one, defectives are tied by the stated correlation.",
    )

    def law_of(self, design: Any) -> CountLaw:
        """Return the law, with the cluster's items tied together."""
        return ClusteredItemsLaw(design.cluster)


class ClusteredPoissonKind(ClusteredKind, PoissonKind):
    """Single plans for defects per unit that come in clusters."""

    law = ClusteredDefectsLaw()
    grammar = _clustered(
        PoissonKind.grammar,
        ClusteredExtent,
        _UNITS,
        "Clusters are independent; within one, units share a rate, with the stated correlation.",
    )

    def law_of(self, design: Any) -> CountLaw:
        """Return the law, with the greatest excess that its clusters may give."""
        row = design_row(self, dataclasses.replace(design, units=max(design.units, design.cluster)))
        return ClusteredDefectsLaw(float(excess(row)))


CLUSTERED = tuple(register(kind) for kind in (ClusteredBinomialKind(), ClusteredPoissonKind()))
