"""Sample sizes for two-sided claims: every size between two bounds is looked at.

The two critical counts of a two-sided test move in their own saw teeth as the sample grows, so its spans are
no intervals. But the size sought lies between two one-sided ones. A count that rejects has a tail of at most
alpha, and so has the wrong end; hence the power exceeds that of the one-sided test at alpha by alpha at most.
It is at least the power of the one-sided test at ``alpha/2`` where the region is no smaller than with split
``half``: always with ``nearest``; with ``rarest`` at the end whose tail falls more slowly, because there the
other tail of a count is the smaller one. Elsewhere Chernoff's bound takes that place.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.law import CountLaw
from steelyard.core.need import Need
from steelyard.core.parameter import Columns, Floats
from steelyard.core.requirements import Requirements
from steelyard.core.splits import ENDS, ONE_SIDED, Tail, Truth, compare

MOST_SIZES = {"half": 20_000, "nearest": 5_000, "rarest": 2_000}  # by what one size costs
LARGEST = 5_000  # amount of a plan with another split than half
_BLOCK = 64
_NARROWINGS = 2
_ROUNDS = 60


def two_sided_amount(law: CountLaw, row: Columns, need: Need, lasting: bool) -> float:
    """Return the first whole amount that meets a two-sided need, or the lasting one; NaN where none does.

    Parameters
    ----------
    law : CountLaw
    row : dict
        The design's fields; its amount is ignored.
    need : Need
    lasting : bool
        False: the first amount; True: the one from which on the need is met for good.

    Raises
    ------
    InvalidValue
        When any real amount is asked for.
    NoAnswer
        When more than `MOST_SIZES` sizes would have to be looked at, or a plan would be too large for that.
    """
    if not need.whole:
        raise InvalidValue(law.amount, "be sought as a whole number for a two-sided claim", "any real number")
    start, stop = _between(law, row, need, lasting)
    if np.isnan(start):
        return np.nan
    if need.split != "half" and start > LARGEST:
        message = (
            f"a plan of more than {LARGEST} {law.amount} for a two-sided claim is sought with split half only"
        )
        raise NoAnswer(message)
    for amounts in _blocks(start, stop, lasting, MOST_SIZES[need.split]):
        met = meets(law, row, need, amounts)
        if lasting and not met.all():
            return float(amounts[~met].max()) + 1 if amounts[~met].max() < stop else np.nan
        if not lasting and met.any():
            return float(amounts[met].min())
    return start if lasting else np.nan


def meets(law: CountLaw, row: Columns, need: Need, amounts: Floats) -> Truth:
    """Tell which amounts meet a need: with the region of its claim and alpha, the power at every catch."""
    columns = {**row, law.amount: amounts}
    tails = region_tails(*region_ends(law, row, need, amounts))
    reached = [compare(law, columns, np.asarray(catch), tails, need.power) >= 0 for catch in need.catches]
    return np.asarray(np.logical_and.reduce(reached))


def region_ends(law: CountLaw, row: Columns, need: Need, amounts: Floats) -> tuple[Floats, Floats]:
    """Return up to which and from which count each amount rejects; NaN for an end that is empty."""
    columns, claim = {**row, law.amount: amounts}, np.asarray(need.claim.value)
    split = need.split if need.claim.side == "either" else ONE_SIDED
    low, high = (
        law.critical(columns, claim, need.alpha, end, split)
        if end in ENDS[need.claim.side]
        else np.full(amounts.shape, np.nan)
        for end in ("low", "high")
    )
    return low, high


def region_tails(low: Floats, high: Floats) -> list[Tail]:
    """Return regions as weighted tails, an empty end with the weight 0."""
    ends = {"low": low, "high": high}
    return [(np.where(np.isnan(x), 0.0, 1.0), end, np.nan_to_num(x)) for end, x in ends.items()]


def _between(law: CountLaw, row: Columns, need: Need, lasting: bool) -> tuple[float, float]:
    """Return amounts between which the sought one lies, both included."""
    largest = float(law.largest(row))
    fewest = [_fewest(law, row, need, catch, lasting) for catch in need.catches]
    most = [min(_most(law, row, need, catch), largest) for catch in need.catches]
    return max(fewest), max(most)


def _fewest(law: CountLaw, row: Columns, need: Need, catch: float, lasting: bool) -> float:
    """Return an amount below which the sought one can't lie; it narrows the wrong end's part of the power."""
    own = need.alpha / 2 if need.split == "half" else need.alpha
    fewest, wrong = math.nan, own
    for _ in range(_NARROWINGS):
        requirement = _one_sided(law, row, need, catch, own, need.power - wrong)
        fewest = float((requirement.lasting() if lasting else requirement.first())[0])
        if math.isnan(fewest) or own >= 0.5:
            break
        # Counts that reject at the wrong end lie beyond the claim's median: Chernoff's bound holds for them.
        shares = (law.share(requirement.columns, rate) for rate in (requirement.claim, requirement.catch))
        wrong = min(own, float(np.exp(-(fewest - 1) * law.divergence(*shares))[0]))
    return fewest


def _most(law: CountLaw, row: Columns, need: Need, catch: float) -> float:
    """Return an amount beyond which the sought one can't lie."""
    shared = _one_sided(law, row, need, catch, need.alpha / 2, need.power)
    if need.split == "rarest" and not (catch > need.claim.value and law.leans_high(need.claim.value)):
        return _rarest_bound(shared, need)
    return float(np.nan_to_num(shared.lasting()[0], nan=np.inf))


def _one_sided(
    law: CountLaw, row: Columns, need: Need, catch: float, alpha: float, power: float
) -> Requirements:
    columns = {name: np.reshape(value, 1) for name, value in row.items()}
    side = "above" if catch > need.claim.value else "below"
    rates = np.array([need.claim.value]), np.array([catch])
    return Requirements(law, columns, side, *rates, np.array([alpha]), np.array([power]))


def _rarest_bound(requirement: Requirements, need: Need) -> float:
    """Return an amount from which on the region of the rarest counts keeps both risks.

    Around a count with probability f, the counts that are no more probable have together at most
    ``(mean + 4) f``: as many as lie below the mean or twice as far above it, and behind those a series that
    falls by half at every step.
    """
    law, share = requirement.law, requirement.balance()
    at_claim = law.share(requirement.columns, requirement.claim)
    falls = law.divergence(share, at_claim)
    amount = np.log(4 / need.alpha) / falls
    for _ in range(_ROUNDS):
        amount = np.log((amount * at_claim + 4) / need.alpha) / falls
    at_catch = law.divergence(share, law.share(requirement.columns, requirement.catch))
    return float(np.ceil(np.maximum(amount, -np.log1p(-need.power) / at_catch) * (1 + 1e-9))[0])


def _blocks(start: float, stop: float, backwards: bool, most: int) -> Iterator[Floats]:
    """Yield the whole numbers from `start` to `stop` in growing blocks, from either end."""
    seen, length = 0, _BLOCK
    while seen <= stop - start:
        if seen > most:
            message = f"more than {most} sizes would have to be looked at: ask for each side by itself"
            raise NoAnswer(message)
        offsets = np.arange(seen, min(seen + length, int(stop - start) + 1), dtype=np.float64)
        yield stop - offsets if backwards else start + offsets
        seen, length = seen + len(offsets), 2 * length
