"""Power over an uncertain rate: the chance that a plan rejects, averaged over what is known of the rate.

With a prior of the law's own family the average is a finite sum, for plans in stages as for single ones: the
counts that lead on to the next stage are carried along with their chances, as for a known rate, only that
the next part of the sample is forecast from what was found before.

References
----------
A. O'Hagan, J. W. Stevens and M. J. Campbell, Pharmaceutical Statistics 4 (2005), 187-201, for the name (from
memory).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.abilities import forecasting
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import claim_of, kind_of
from steelyard.core.numbers import read_choice, read_number
from steelyard.core.parameter import Floats
from steelyard.core.plan import Claim, Plan
from steelyard.core.priors import Prior
from steelyard.core.questions import size
from steelyard.core.splits import first_whole
from steelyard.core.walk import Look

COUNTED = ("all", "right")
MOST = 1e9
_SURE = 1.0 - 2e-16


def assurance(plan: Plan, a: Any, b: Any, counted: str = COUNTED[0]) -> float:
    """Return the chance that a plan rejects its claim, over an uncertain rate.

    Parameters
    ----------
    plan : Plan
        Single or in stages, with perfect inspection.
    a, b : float or str
        Both above 0. The defect rate has a beta law with the mean ``a / (a + b)``; defectives in a lot are
        those of a lot from such a process; defects per unit have a gamma law with the mean ``a / b``.
    counted : {"all", "right"}
        Every rejection, or those only where the claim is false.

    Raises
    ------
    InvalidValue
        When `a` or `b` is not positive, or rejections cannot be right for lack of a claim.
    NoAnswer
        When the kind has no such average.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plan = read_plan("binomial | n 50 | claim p<=0.02 | reject x>=4")
    >>> round(assurance(plan, 2, 38), 6), round(assurance(plan, 2, 38, "right"), 6)
    (0.267432, 0.266387)
    """
    kind = forecasting(kind_of(plan))
    prior = kind.prior(plan, _positive(a, "a"), _positive(b, "b"))
    right = read_choice(counted, "counted", COUNTED) == "right"
    if right and claim_of(plan).side == "either":
        return assurance(plan, a, b) - prior.equal(claim_of(plan).value) * size(plan)
    chances = [
        _rejected(place, many, claim_of(plan) if right else None)
        for looks, many in kind.paths(plan)
        for place in _course(prior, looks)
    ]
    return float(min(sum(chances), 1.0))


def _positive(value: Any, name: str) -> float:
    number = read_number(value, name)
    if not 0 < number <= MOST:
        raise InvalidValue(name, f"be greater than 0 and at most {MOST:.0f}", value)
    return number


@dataclass(frozen=True, slots=True)
class _Place:
    """The counts that come to a look, after an amount, with their chances over the prior."""

    prior: Prior
    look: Look
    amount: float
    counts: Floats
    chances: Floats

    @property
    def step(self) -> float:
        """What is inspected on the way to the look."""
        return self.look.amount - self.amount

    def exactly(self, totals: Floats) -> Floats:
        """Return the chances of counts at the look."""
        more = totals[:, None] - self.counts
        chances: Floats = self.prior.exactly(more, self.step, self.amount, self.counts) @ self.chances
        return chances

    def at_most(self, total: float) -> float:
        """Return the chance of at most a count at the look."""
        more = total - self.counts
        return float(self.prior.at_most(more, self.step, self.amount, self.counts) @ self.chances)

    def at_least(self, total: float) -> float:
        """Return the chance of at least a count at the look."""
        more = total - self.counts
        return float(self.prior.at_least(more, self.step, self.amount, self.counts) @ self.chances)


def _course(prior: Prior, looks: Sequence[Look]) -> Iterator[_Place]:
    """Yield what comes to each look, undecided by those before."""
    place = _Place(prior, looks[0], 0.0, np.zeros(1), np.ones(1))
    yield place
    for look in looks[1:]:
        open_ = np.arange(max(place.counts[0], place.look.accept + 1.0), place.look.reject)
        if not open_.size:
            return
        place = _Place(prior, look, place.look.amount, open_, place.exactly(open_))
        yield place


def _rejected(place: _Place, many: bool, claim: Claim | None) -> float:
    """Return the chance to reject at a look, on many counts or on few; of a claim only where it is false."""
    first = place.look.reject if many else 0
    if claim is None:
        return place.at_least(first) if many else place.at_most(place.look.accept)
    beyond = place.prior.above if claim.side == "above" else place.prior.below

    def false(totals: Floats) -> Floats:
        return beyond(claim.value, place.look.amount, totals)

    if not many:
        totals = np.arange(place.look.accept + 1.0)
        return float(place.exactly(totals) @ false(totals))
    # From some count on the claim is false as good as surely.
    most = float(place.counts[-1] + place.step)
    last = float(
        first_whole(lambda total: (false(total) >= _SURE) | (total >= most), np.asarray(float(first)))
    )
    totals = np.arange(float(first), last + 1)
    return float(place.exactly(totals) @ false(totals)) + place.at_least(last + 1)
