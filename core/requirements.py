"""One-sided requirements, many at once: a claim to keep at alpha and a rate to catch with a power.

Each critical count has a span of sample sizes that keep both risks (`steelyard.core.spans`). The *first*
size is where the first span that is not empty opens. The *lasting* size lies behind the last gap between
spans: from there on the power never falls short, although it moves in saw teeth. Both ends of the spans grow
with the count, so whole ranges of counts are settled by looking at their ends only; Chernoff's bound says
behind which count there are no more gaps.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from steelyard.core.errors import InvalidValue
from steelyard.core.law import CountLaw
from steelyard.core.need import Need
from steelyard.core.others import Others
from steelyard.core.parameter import Columns, Floats
from steelyard.core.spans import Risk, Rows

_HALVINGS = 4
_AT_ONCE = 64  # counts to look at in one call, at the least
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
        return self._by_the_fewer(Requirements._first)

    def lasting(self) -> Floats:
        """Return the amounts from which on the requirements are met for good; NaN beyond the largest."""
        return self._by_the_fewer(Requirements._lasting)

    def _by_the_fewer(self, find: Callable[[Requirements], Floats]) -> Floats:
        """Search by the events where these are the fewer, else by what is none."""
        if math.isinf(self.law.most({self.law.amount: np.ones(())})):
            return find(self)
        often = self.law.share(self.columns, self.claim) + self.law.share(self.columns, self.catch) > 1
        if not often.any():
            return find(self)
        amount = np.empty(self.claim.shape)
        turned = "below" if self.side == "above" else "above"
        for rows, law, side in ((~often, self.law, self.side), (often, Others(self.law), turned)):
            if rows.any():
                columns = {name: column[rows] for name, column in self.columns.items()}
                numbers = self.claim[rows], self.catch[rows], self.alpha[rows], self.power[rows]
                amount[rows] = find(Requirements(law, columns, side, *numbers))
        return amount

    def _first(self) -> Floats:
        spans, most, last = self._spans(), self.claim.size, self.last_counts()

        def ends(rows: Rows, count: Floats) -> tuple[Floats, Floats]:
            turns = spans.turn(np.concatenate([rows, rows + most]), np.concatenate([count, count]))
            return turns[: rows.size], turns[rows.size :]

        return self._amount(_least(last, ends)[1] * spans.step[:most])

    def _lasting(self) -> Floats:
        spans, most, last = self._spans(), self.claim.size, self.last_counts()

        def gaps(rows: Rows, mirrored: Floats) -> tuple[Floats, Floats]:
            """Return the ends of the gap before a count, mirrored: so that the last gap is the least."""
            count = last[rows] + 1 - mirrored
            counts = np.concatenate([count, np.maximum(count - 1, 1.0)])
            turns = spans.turn(np.concatenate([rows, rows + most]), counts)
            before = np.where(count > 1, turns[rows.size :], 0.0)
            return -turns[: rows.size], -before - 2

        gap, opens = _least(last, gaps)
        steps = np.where(gap <= last, -opens, 1.0)  # without any gap the first size of all will do
        return self._amount(steps * spans.step[:most])

    def last_counts(self) -> Floats:
        """Return critical counts behind which every span overlaps the one before.

        At a rate `t` per unit between the two rates, Chernoff's bound keeps both risks at every amount from
        ``max(log(1/risk) / divergence)`` on, with the critical count `t` times the amount.
        """
        share = self.balance()
        return np.maximum(np.ceil(self._enough(share) * share), 1.0)

    def _enough(self, share: Floats) -> Floats:
        """Return amounts from which on both risks are kept, by Chernoff's bound."""
        return np.maximum(*self._needed(share)) * (1 + 1e-9) + 1

    def balance(self) -> Floats:
        """Return the counts per unit at which Chernoff's bound asks the same amount for either risk."""
        near, far = (self.law.share(self.columns, rate) for rate in (self.claim, self.catch))
        for _ in range(_HALVINGS):
            middle = (near + far) / 2
            at_claim, at_catch = self._needed(middle)
            near_claim = at_claim > at_catch
            near, far = np.where(near_claim, middle, near), np.where(near_claim, far, middle)
        return (near + far) / 2

    def _needed(self, share: Floats) -> tuple[Floats, Floats]:
        """Return the amounts that Chernoff's bound asks for alpha at the claim, and for the power."""
        at_claim, at_catch = (
            self.law.divergence(share, self.law.share(self.columns, rate))
            for rate in (self.claim, self.catch)
        )
        size, missed = -np.log(self.alpha), -np.log1p(-self.power)
        return size / np.maximum(at_claim, _TINY), missed / np.maximum(at_catch, _TINY)

    def _spans(self) -> Risk:
        """Return what opens the spans, and after that what closes them."""
        size, power = (self.claim, self.alpha), (self.catch, self.power)
        (first, last), end = ((power, size), "high") if self.side == "above" else ((size, power), "low")
        columns = {name: np.tile(column, 2) for name, column in self.columns.items()}
        rate, bound = (np.concatenate(parts) for parts in zip(first, last, strict=True))
        closing = np.repeat([False, True], self.claim.size)
        return Risk(self.law, columns, end, rate, bound, closing, np.tile(self.steps(), 2))

    def steps(self) -> Floats:
        """Return the amount of one step of the search: 1, or so little that it stands for a real number."""
        if self.whole:
            return np.ones(self.claim.shape)
        return 2.0 ** np.ceil(np.log2(self._enough(self.balance()) / _REAL_STEPS))

    def _amount(self, amount: Floats) -> Floats:
        """Return the amounts that are allowed, NaN for the others."""
        return np.where(amount <= self.law.largest(self.columns), amount, np.nan)


def one_sided_amount(law: CountLaw, row: Columns, need: Need, lasting: bool) -> float:
    """Return the first or the lasting amount that meets a one-sided need; NaN beyond the largest amount."""
    columns = {name: np.reshape(value, 1) for name, value in row.items()}
    claim, catch, alpha, power = (
        np.array([number]) for number in (need.claim.value, need.catches[0], need.alpha, need.power)
    )
    requirement = Requirements(law, columns, need.claim.side, claim, catch, alpha, power, need.whole)
    return float((requirement.lasting() if lasting else requirement.first())[0])


def _least(last: Floats, ends: Ends) -> tuple[Floats, Floats]:
    """Return the least count whose interval is not empty, and where that opens.

    Parameters
    ----------
    last : ndarray of float
        For each requirement, the last count to look at; the first is 1.
    ends : callable
        From requirements and counts to the interval's two ends, neither of which falls as the count grows.
        So all counts between `a` and `b` are settled where `a` opens after `b` closes.

    Returns
    -------
    count, opens : ndarray of float
        ``last + 1`` and infinity where all intervals are empty.
    """
    best: Floats = last + 1
    start: Floats = np.full(last.shape, np.inf)
    rows: Rows = np.arange(last.size)
    a, b = np.zeros(last.shape), last + 1  # on both sides just beyond, where nothing is known yet
    opens, closes = -start, start.copy()

    def look(rows: Rows, count: Floats) -> tuple[Floats, Floats]:
        """Evaluate counts, and note the least whose interval is not empty."""
        opens, closes = ends(rows, count)
        fits = opens <= closes
        np.minimum.at(best, rows[fits], count[fits])
        np.minimum.at(start, rows[fits], opens[fits])
        return opens, closes

    while True:
        keep = (b - a > 1) & (opens <= closes) & (a + 1 < best[rows])
        rows = rows[keep]
        a, b, opens, closes = (part[keep] for part in (a, b, opens, closes))
        if not rows.size:
            return best, start
        pieces = np.minimum(b - a, max(2, _AT_ONCE // rows.size)).astype(np.intp)
        whole = np.repeat(np.arange(rows.size), pieces)
        place = np.arange(whole.size) - np.repeat(np.cumsum(pieces) - pieces, pieces)
        edges = (a[whole] + np.floor((b - a)[whole] * part / pieces[whole]) for part in (place, place + 1))
        rows, a, b, opens, closes = rows[whole], *edges, opens[whole], closes[whole]
        inner = np.flatnonzero(place + 1 < pieces[whole])
        opens[inner + 1], closes[inner] = look(rows[inner], b[inner])
