"""Size and power against the amount: the saw teeth, and the plans between first and lasting size."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from steelyard.core.errors import NoAnswer
from steelyard.core.need import Need
from steelyard.core.parameter import Floats
from steelyard.core.plan import Reject
from steelyard.core.regions import design_row
from steelyard.core.smallest import count_law, smallest_amount
from steelyard.core.splits import Truth
from steelyard.core.two_sided import meets, region_ends, region_tails

MOST_AMOUNTS = 500_000


@dataclass(frozen=True, slots=True)
class SizeCurve:
    """What a claim and alpha give at several amounts, as arrays of one length.

    Parameters
    ----------
    amount : ndarray of float
        Items or units inspected.
    low, high : ndarray of float
        The plan rejects up to `low` and from `high` on; NaN where that end is empty.
    size, power : ndarray of float
        The actual size, and the least power over the rates to catch.
    met : ndarray of bool
        Whether the power is reached, ties decided exactly.
    """

    amount: Floats
    low: Floats
    high: Floats
    size: Floats
    power: Floats
    met: Truth


@dataclass(frozen=True, slots=True)
class Candidate:
    """Neighbouring amounts with one rule, all of which meet a need.

    Parameters
    ----------
    least, most : float
        The first and the last of the amounts.
    rule : Reject
    """

    least: float
    most: float
    rule: Reject


def size_curve(need: Need, amounts: ArrayLike) -> SizeCurve:
    """Return size and power against the amount, for a kind that rejects by a count.

    Parameters
    ----------
    need : Need
    amounts : array_like of float
        Amounts that the kind allows.

    Examples
    --------
    >>> from steelyard.core.need import need_from
    >>> curve = size_curve(need_from("binomial", "5%", 0.05, "20%", 0.8), [26, 27, 28, 29])
    >>> curve.high.tolist(), curve.power.round(3).tolist()
    ([4.0, 4.0, 4.0, 5.0], [0.793, 0.818, 0.84, 0.716])
    """
    law, row = count_law(need.kind), design_row(need.kind, need.design)
    amount = np.asarray(amounts, dtype=float)
    columns = {**row, law.amount: amount}
    low, high = region_ends(law, row, need, amount)

    def chance(rate: float) -> Floats:
        tails = region_tails(low, high)
        sides = {"low": law.at_most, "high": law.at_least}
        total = sum(weight * sides[end](x, columns, np.asarray(rate)) for weight, end, x in tails)
        return np.asarray(np.minimum(total, 1.0))

    power = np.minimum.reduce([chance(catch) for catch in need.catches])
    return SizeCurve(amount, low, high, chance(need.claim.value), power, meets(law, row, need, amount))


def candidates(need: Need) -> list[Candidate]:
    """Return the plans between the first and the lasting size, neighbouring amounts with one rule as one.

    Parameters
    ----------
    need : Need
        Of a kind that rejects by a count, with whole amounts.

    Raises
    ------
    NoAnswer
        When no plan meets the need, or the two sizes lie too far apart for a list.

    Examples
    --------
    >>> from steelyard.core.need import need_from
    >>> for one in candidates(need_from("binomial", "5%", 0.05, "20%", 0.8)):
    ...     print(one.least, one.most, one.rule.text("x"))
    27.0 28.0 x>=4
    33.0 40.0 x>=5
    """
    first, lasting = smallest_amount(need), smallest_amount(need, lasting=True)
    if lasting - first > MOST_AMOUNTS:
        message = (
            f"the first and the lasting size, {first:.0f} and {lasting:.0f}, lie too far apart for a list"
        )
        raise NoAnswer(message)
    curve = size_curve(need, np.arange(first, lasting + 1))
    rules = np.nan_to_num(np.stack([curve.low, curve.high, curve.met]), nan=-1.0)
    starts = np.flatnonzero(np.append(True, (np.diff(rules) != 0).any(axis=0)))
    ends = np.append(starts[1:], curve.amount.size) - 1
    found = [
        Candidate(
            float(curve.amount[start]), float(curve.amount[end]), _rule(curve.low[start], curve.high[start])
        )
        for start, end in zip(starts, ends, strict=True)
        if curve.met[start]
    ]
    return [*found[:-1], _extended(need, found[-1])]


def _rule(low: float, high: float) -> Reject:
    return Reject(None if np.isnan(low) else float(low), None if np.isnan(high) else float(high))


def _extended(need: Need, last: Candidate) -> Candidate:
    """Return the last candidate with all the amounts that have its rule."""
    law, row = count_law(need.kind), design_row(need.kind, need.design)
    most, length = last.most, 64.0
    while True:
        amounts = np.minimum(most + np.arange(1, length + 1), float(law.largest(row)))
        low, high = region_ends(law, row, need, amounts)
        same = np.array([_rule(*ends) == last.rule for ends in zip(low, high, strict=True)])
        if not same.all() or amounts[-1] == most:
            return Candidate(last.least, float(amounts[same].max(initial=most)), last.rule)
        most, length = float(amounts[-1]), 2 * length
