"""One-sided requirements, many at once: a claim to keep at alpha and a rate to catch with a power.

Each critical count has a span of sample sizes that keep both risks (`steelyard.core.spans`). The *first*
size is where the first span that is not empty opens. The *lasting* size lies behind the last gap between
spans: from there on the power never falls short, although it moves in saw teeth. Both ends of the spans grow
with the count, so whole ranges of counts are settled by looking at their ends only; Chernoff's bound says
behind which count there are no more gaps.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from steelyard.core.errors import InvalidValue
from steelyard.core.law import CountLaw
from steelyard.core.need import Need
from steelyard.core.parameter import Columns, Floats
from steelyard.core.spans import Risk, Rows

_HALVINGS = 30
_TINY = 1e-300
_REAL_STEPS = 2.0**46  # so many steps to the largest size that can be needed, where it may be any real number

Ends = Callable[[Rows, Floats], tuple[Floats, Floats]]


@dataclass(frozen=True, slots=True)
class Requirements:
    """One-sided requirements of one law and one side, as arrays of one shape ``(requirements,)``.

    Parameters
    ----------
    law : CountLaw
    columns : dict of ndarray
        The designs' fields except the amount.
    side : {"above", "below"}
        Where the rate to catch lies.
    claim, catch : ndarray of float
        Rates in the parameter's own unit; `catch` lies on `side` of `claim`.
    alpha, power : ndarray of float
        The largest size and the least power; `power` is greater than `alpha`.
    whole : bool
        Whether the amount is a whole number.
    """

    law: CountLaw
    columns: Columns
    side: str
    claim: Floats
    catch: Floats
    alpha: Floats
    power: Floats
    whole: bool = True

    def __post_init__(self) -> None:
        if not (self.whole or self.law.divisible):
            raise InvalidValue(self.law.amount, "be sought as a whole number", "any real number")

    def first(self) -> Floats:
        """Return the first amounts that meet the requirements; NaN where none allowed does."""
        spans = self._spans()
        count = _least(self.last_counts(), lambda rows, k: (spans[0].turn(rows, k), spans[1].turn(rows, k)))
        return self._opening(spans[0], count)

    def lasting(self) -> Floats:
        """Return the amounts from which on the requirements are met for good; NaN beyond the largest."""
        opening, closing = self._spans()
        last = self.last_counts()

        def gaps(rows: Rows, mirrored: Floats) -> tuple[Floats, Floats]:
            """Return the ends of a gap before a count, mirrored: so that the last gap is the least."""
            count = last[rows] + 1 - mirrored
            before = np.where(count > 1, closing.turn(rows, np.maximum(count - 1, 1.0)), 0.0)
            return -opening.turn(rows, count), -before - 2

        count = last + 1 - _least(last, gaps)
        return self._opening(opening, np.maximum(count, 1.0))

    def last_counts(self) -> Floats:
        """Return critical counts behind which every span overlaps the one before.

        At a rate `t` per unit between the two rates, Chernoff's bound keeps both risks at every amount from
        ``max(log(1/risk) / divergence)`` on, with the critical count `t` times the amount.
        """
        return np.maximum(np.ceil(self.last_amounts() * self.balance()), 1.0)

    def last_amounts(self) -> Floats:
        """Return amounts from which on both risks are kept, by Chernoff's bound."""
        at_claim, at_catch = self._needed(self.balance())
        return np.maximum(at_claim, at_catch) * (1 + 1e-9) + 1

    def balance(self) -> Floats:
        """Return the counts per unit at which Chernoff's bound asks the same amount for either risk."""
        near, far = (self.law.share(self.columns, rate) for rate in (self.claim, self.catch))
        for _ in range(_HALVINGS):
            middle = (near + far) / 2
            at_claim, at_catch = self._needed(middle)
            near, far = (
                np.where(at_claim > at_catch, middle, near),
                np.where(at_claim > at_catch, far, middle),
            )
        return (near + far) / 2

    def _needed(self, share: Floats) -> tuple[Floats, Floats]:
        """Return the amounts that Chernoff's bound asks for alpha at the claim, and for the power."""
        ways = (-np.log(self.alpha), self.claim), (-np.log1p(-self.power), self.catch)
        at_claim, at_catch = (
            risk / np.maximum(self.law.divergence(share, self.law.share(self.columns, rate)), _TINY)
            for risk, rate in ways
        )
        return at_claim, at_catch

    def _spans(self) -> tuple[Risk, Risk]:
        """Return what opens and what closes a span: the size and the power, each at its rate."""
        step = self.steps()
        size, power = (self.claim, self.alpha), (self.catch, self.power)
        (first, last), end = ((power, size), "high") if self.side == "above" else ((size, power), "low")
        return (
            Risk(self.law, self.columns, *first, end, False, step),
            Risk(self.law, self.columns, *last, end, True, step),
        )

    def steps(self) -> Floats:
        """Return the amount of one step of the search: 1, or so little that it stands for a real number."""
        if self.whole:
            return np.ones(self.claim.shape)
        return 2.0 ** np.ceil(np.log2(self.last_amounts() / _REAL_STEPS))

    def _opening(self, opening: Risk, count: Floats) -> Floats:
        found = np.flatnonzero(count <= self.last_counts())
        amount = np.full(count.shape, np.nan)
        steps = opening.turn(found, count[found])
        allowed = np.floor(self.law.largest(self.columns) / opening.step)
        part = steps * opening.step[found]
        amount[found] = np.where(steps <= np.broadcast_to(allowed, count.shape)[found], part, np.nan)
        return amount


def one_sided_amount(law: CountLaw, row: Columns, need: Need, lasting: bool) -> float:
    """Return the first or the lasting amount that meets a one-sided need; NaN beyond the largest amount."""
    columns = {name: np.reshape(value, 1) for name, value in row.items()}
    numbers = (np.array([number]) for number in (need.claim.value, need.catches[0], need.alpha, need.power))
    requirement = Requirements(law, columns, need.claim.side, *numbers, whole=need.whole)
    return float((requirement.lasting() if lasting else requirement.first())[0])


def _least(last: Floats, ends: Ends) -> Floats:
    """Return the least count whose interval is not empty; ``last + 1`` where there is none.

    Parameters
    ----------
    last : ndarray of float
        For each requirement, the last count to look at; the first is 1.
    ends : callable
        From requirements and counts to the interval's two ends, neither of which falls as the count grows.
        So all counts between `a` and `b` are settled where `a` opens after `b` closes.
    """
    best = last + 1
    rows = np.arange(last.size)
    a, b = np.ones(last.shape), np.array(last)
    opens, closes = _look(best, rows, a, ends)[0], _look(best, rows, b, ends)[1]
    while True:
        keep = (b - a > 1) & (opens <= closes) & (a + 1 < best[rows])
        rows, a, b, opens, closes = (part[keep] for part in (rows, a, b, opens, closes))
        if not rows.size:
            return best
        middle = np.floor((a + b) / 2)
        middle_opens, middle_closes = _look(best, rows, middle, ends)
        rows = np.concatenate([rows, rows])
        a, b = np.concatenate([a, middle]), np.concatenate([middle, b])
        opens, closes = np.concatenate([opens, middle_opens]), np.concatenate([middle_closes, closes])


def _look(best: Floats, rows: Rows, count: Floats, ends: Ends) -> tuple[Floats, Floats]:
    """Evaluate counts and note those whose interval is not empty."""
    opens, closes = ends(rows, count)
    fits = opens <= closes
    np.minimum.at(best, rows[fits], count[fits])
    return opens, closes
