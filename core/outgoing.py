"""How much a plan inspects on average, and what quality leaves rectifying inspection.

Rectifying inspection inspects every failed lot whole. With N items in a lot, the average total inspected is
the sum over all ways to pass of chance times items inspected, plus N times the chance to fail. Defectives
found are replaced by good items, or removed. With L, the defectives a lot still holds when it leaves, on
average over all lots, and D, those that came in, the average outgoing quality is

- replaced: L / N;
- removed: L / (N - D + L), a ratio of expectations, as lots then differ in size.

From a process of rate p, D is p N and the items not inspected have the rate p, whatever was found; of a
finite lot those not inspected hold what the sample did not find, and L is a sum over what it may find.

References
----------
H. F. Dodge and H. G. Romig, Sampling Inspection Tables, 2nd ed. 1959; I. Beainy and K. E. Case, J. Qual.
Technology 13 (1981), for the two forms (both from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.abilities import Inspecting, averaging, inspecting, stepping
from steelyard.core.endings import Endings
from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import kind_of
from steelyard.core.numbers import read_choice, read_number, read_whole
from steelyard.core.parameter import Floats, Parameter
from steelyard.core.plan import Plan

_WHAT = "average outgoing quality or total inspected"
FOUND = ("replaced", "removed")
MOST_IN_LOT = 1e12
_TOLERANCE = 1e-5  # what other maxima are certified not to exceed the one found by
_LEAST, _POINTS = 1e-9, 300
_NOTHING = 1e-9
_ZOOMS, _FINE = 10, 33


def average_sample(plan: Plan, *rates: Any) -> float:
    """Return the average sample number: the expected amount inspected until the plan decides.

    Parameters
    ----------
    plan : Plan
        A single plan inspects the same amount whatever the rate.
    *rates : float, int or str
        The true parameter, in its own unit.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plan = read_plan("binomial | stages 50 then 100 | accept 2 then 6 | reject 7 then 7")
    >>> round(average_sample(plan, "6%"), 4)
    105.4829
    """
    kind = kind_of(plan)
    given = [rate for rate in rates if rate is not None]
    read = [
        np.array([parameter.read(rate, plan.design)])
        for parameter, rate in zip(kind.parameters, given, strict=False)
    ]
    return float(averaging(kind).average_amount(kind.columns([plan]), *read)[0])


def endings(plan: Plan, rate: Any) -> Endings:
    """Return the ways in which a plan may end, at one rate."""
    kind = kind_of(plan)
    return inspecting(kind, "known ways to end").endings(plan, _read(plan, rate))


def steps(plan: Plan) -> list[tuple[float, int | None, int | None]]:
    """Return what the inspector needs at the bench: amounts inspected, acceptance and rejection numbers.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> steps(read_plan("binomial | stages 20 then 20 | accept none then 1 | reject 2 then 2"))
    [(20.0, None, 2), (40.0, 1, 2)]
    """
    return stepping(kind_of(plan)).steps(plan)


def total_inspected(plan: Plan, rate: Any, lot: Any = None) -> float:
    """Return the average total inspected per lot if failed lots are inspected whole.

    Parameters
    ----------
    plan : Plan
    rate : float, int or str
    lot : float, int or str, optional
        Items, or units, in the lot; a plan for a finite lot knows it.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> round(total_inspected(read_plan("binomial | n 52 | reject x>=4"), "3%", 10000), 4)
    752.9621
    """
    rectified = Rectified.of(plan, lot)
    return float(rectified.total(_read(plan, rate))[0])


def outgoing(plan: Plan, rate: Any, lot: Any = None, defectives: str = "replaced") -> float:
    """Return the average outgoing quality: the share of defectives, or defects per unit.

    Parameters
    ----------
    plan : Plan
    rate : float, int or str
        The incoming rate.
    lot : float, int or str, optional
        See `total_inspected`.
    defectives : {"replaced", "removed"}
        What happens to the defectives that inspection finds.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> round(outgoing(read_plan("hypergeometric | lot 200 | n 50 | reject x>=2"), 8), 5)
    0.01316
    """
    rectified = Rectified.of(plan, lot, defectives)
    return float(rectified.quality(_read(plan, rate))[0])


def outgoing_limit(plan: Plan, lot: Any = None, defectives: str = "replaced") -> tuple[float, float]:
    """Return the average outgoing quality limit, and the incoming rate at which it is reached.

    The limit is the greatest outgoing rate over all incoming rates. The search is global: the higher the
    rate, the less likely is each defective to pass, so between two rates the outgoing rate has a simple
    bound, and every interval that may hold a higher value is halved.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> limit, rate = outgoing_limit(read_plan("binomial | n 52 | reject x>=4"), 10000)
    >>> round(limit, 6), round(rate, 5)
    (0.03719, 0.05591)
    """
    rectified = Rectified.of(plan, lot, defectives)
    return rectified.maximum()


@dataclass(frozen=True, slots=True)
class Rectified:
    """A plan whose failed lots are inspected whole.

    Parameters
    ----------
    plan : Plan
    lot : float
        Items, or units, in the lot.
    defectives : {"replaced", "removed"}
    """

    plan: Plan
    lot: float
    defectives: str

    @classmethod
    def of(cls, plan: Plan, lot: Any = None, defectives: str = "replaced") -> Rectified:
        """Return the plan with a lot from what people type.

        Raises
        ------
        InvalidValue
            When the lot is missing, too small, or not the plan's own.
        NoAnswer
            When the plan errs in what it finds, or does not fail on many defectives.
        """
        kind, defectives = kind_of(plan), read_choice(defectives, "defectives", FOUND)
        ways = inspecting(kind, _WHAT).endings(plan, np.zeros(1))
        if kind.grammar.base:
            message = f"outgoing quality is known for inspection without errors, not for {kind.grammar.kind}"
            raise NoAnswer(message)
        if kind.rises(plan) != (plan.verdict == "fail") or (plan.claim and plan.claim.side == "either"):
            message = "outgoing quality needs a plan that fails the lot on many defectives, and only then"
            raise NoAnswer(message)
        if defectives == "removed" and _counts_defects(plan):
            raise InvalidValue(
                "defectives", "be replaced where defects are counted: they are corrected", defectives
            )
        return cls(plan, _lot(plan, lot, float(ways.amounts[-1])), defectives)

    def total(self, rate: Floats) -> Floats:
        """Return the average total inspected."""
        return self._kind.endings(self.plan, rate).total(self.lot)

    def quality(self, rate: Floats) -> Floats:
        """Return the average outgoing quality."""
        return self._quality(rate, self._kind.left(self.plan, rate, self.lot))

    def maximum(self) -> tuple[float, float]:
        """Return the highest outgoing quality and the rate where it lies."""
        whole, rates = self._parameter.whole, self._grid()
        low, high, best, where = rates[:-1], rates[1:], 0.0, 0.0
        kept, kept_high = self._kept(low), self._kept(high)
        while low.size:
            values = self._quality(high, high * kept_high)
            if values.max() > best:
                best, where = float(values.max()), float(high[values.argmax()])
            above = self._quality(high, high * kept) > best * (1.0 if whole else 1.0 + _TOLERANCE)
            open_ = above & (high - low > whole)
            low, high, kept, kept_high = low[open_], high[open_], kept[open_], kept_high[open_]
            middle = (low + high) // 2 if whole else (low + high) / 2
            between = self._kept(middle)
            low, high = np.concatenate([low, middle]), np.concatenate([middle, high])
            kept, kept_high = np.concatenate([kept, between]), np.concatenate([between, kept_high])
        return (best, where) if whole else self._polished(where)

    @property
    def _kind(self) -> Inspecting:
        return inspecting(kind_of(self.plan), _WHAT)

    @property
    def _parameter(self) -> Parameter:
        return kind_of(self.plan).parameters[0]

    def _quality(self, rate: Floats, left: Floats) -> Floats:
        if self.defectives == "replaced":
            return left / self.lot
        remaining = self.lot - rate * self._per_rate + left  # the size of a lot that leaves
        return np.divide(left, remaining, out=np.zeros(left.shape), where=remaining > 0)

    @property
    def _per_rate(self) -> float:
        """How many defectives a lot holds per unit of the rate."""
        return 1.0 if self._parameter.whole else self.lot

    def _kept(self, rate: Floats) -> Floats:
        """Return how many defectives a lot keeps per unit of the rate: the fewer, the higher the rate."""
        left = self._kind.left(self.plan, rate, self.lot)
        kept: Floats = np.divide(left, rate, out=np.full(rate.shape, self._per_rate), where=rate > 0)
        return kept

    def _grid(self) -> Floats:
        """Return rates from 0 to where hardly a lot passes."""
        if self._parameter.whole:
            return np.unique(np.floor(np.geomspace(1.0, self.lot + 1.0, _POINTS)) - 1.0)
        most = min(1 / self.lot, self._parameter.upper)
        while most < self._parameter.upper and most * self._kept(np.array([most]))[0] > _NOTHING:
            most = min(2 * most, self._parameter.upper)
        return np.concatenate([[0.0], most * np.geomspace(_LEAST, 1.0, _POINTS)])

    def _polished(self, where: float) -> tuple[float, float]:
        """Return the local maximum, by ever finer grids: the curve is flat there, so few digits do."""
        width = where / 100
        for _ in range(_ZOOMS):
            rates = np.linspace(where - width, min(where + width, self._parameter.upper), _FINE)
            values = self.quality(rates)
            where, width = float(rates[values.argmax()]), width / 8
        return float(values.max()), where


def _read(plan: Plan, rate: Any) -> Floats:
    return np.array([kind_of(plan).parameters[0].read(rate, plan.design)])


def _counts_defects(plan: Plan) -> bool:
    """Tell whether the plan counts defects per unit, of which there may be any number, and not defectives."""
    parameter = kind_of(plan).parameters[0]
    return math.isinf(parameter.upper) and not parameter.whole


def _lot(plan: Plan, lot: Any, least: float) -> float:
    """Return the lot, which a plan for a finite lot knows itself."""
    own = plan.design.lot if kind_of(plan).grammar.extra == "lot" else None
    if lot is None and own is None:
        raise InvalidValue("lot", "be given for a plan that does not name it", None)
    if lot is None:
        return float(plan.design.lot)
    size = read_number(lot, "lot") if _counts_defects(plan) else float(read_whole(lot, "lot", 1))
    if own is not None and size != own:
        raise InvalidValue("lot", f"be the plan's own {own}, or left out", lot)
    if not least <= size <= MOST_IN_LOT:
        raise InvalidValue("lot", f"hold at least the {least:g} that the plan may inspect", lot)
    return size
