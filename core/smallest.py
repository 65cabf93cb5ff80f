"""The smallest plan that keeps alpha at its claim and reaches a power at the rate to catch.

The power of a test of counts moves in saw teeth as the sample grows: the *first* size that reaches the
power need not be safe to round up. From the *lasting* size on the power never falls short again.

Every size is decided by its defining inequality, exactly on the decimals as typed: at the size found the
plan keeps alpha and reaches the power; at the size before (for the first size: at none before) it does not.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.abilities import sizable
from steelyard.core.designs import kind_named
from steelyard.core.errors import NoAnswer
from steelyard.core.kind import Kind
from steelyard.core.law import CountLaw
from steelyard.core.need import Need, need_from
from steelyard.core.numbers import read_choice
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan
from steelyard.core.regions import make_plan
from steelyard.core.requirements import Requirements
from steelyard.core.splits import ENDS, ONE_SIDED


def smallest_plan(
    kind_name: str,
    claim: Any,
    alpha: Any,
    catch: Any,
    power: Any,
    *,
    side: str | None = None,
    lasting: bool = False,
    extra: Any = None,
    split: str = "half",
    verdict: str = "fail",
    whole: bool = True,
) -> Plan:
    """Return the smallest plan that keeps alpha at the claim and reaches a power at the rate to catch.

    Parameters
    ----------
    kind_name, claim, alpha, catch, power, side, extra, split, whole
        See `steelyard.core.need.need_from`.
    lasting : bool
        False: the first size that reaches the power; True: the one from which on it always does.
    verdict : {"fail", "pass"}
        What rejecting the claim means for the lot.

    Raises
    ------
    InvalidValue
        When a value is refused, or the catch lies where the claim is true.
    NoAnswer
        When no plan that is small enough does, or the kind has no such search.

    Examples
    --------
    >>> from steelyard.core.text import write_plan
    >>> write_plan(smallest_plan("binomial", "50 ppm", "5%", "200 ppm", "90%"))
    'binomial | n 46372 | claim p<=5e-05 | alpha 0.05 | reject x>=6'
    >>> write_plan(smallest_plan("binomial", "50 ppm", "5%", "200 ppm", "90%", lasting=True))
    'binomial | n 52659 | claim p<=5e-05 | alpha 0.05 | reject x>=7'
    >>> write_plan(smallest_plan("hypergeometric", "1%", "5%", "5%", "90%", extra=60))
    'hypergeometric | lot 60 | n 32 | claim D<=0 | alpha 0.05 | reject x>=1'
    """
    need = need_from(kind_name, claim, alpha, catch, power, side=side, extra=extra, split=split, whole=whole)
    return plan_for(need, lasting, verdict)


def plan_for(need: Need, lasting: bool = False, verdict: str = "fail") -> Plan:
    """Return the first or the lasting plan that meets a need; see `smallest_plan`."""
    design = need.sized(smallest_amount(need, lasting))
    return make_plan(need.kind.grammar.kind, design, need.claim, need.alpha, need.split, verdict)


def smallest_amount(need: Need, lasting: bool = False) -> float:
    """Return the first or the lasting amount that meets a need.

    Raises
    ------
    NoAnswer
        When even the largest amount allowed does not meet it.
    """
    amount = sizable(need.kind).smallest_amount(need, lasting)
    if math.isnan(amount):
        message = f"no plan of a size that is allowed has {need}"
        raise NoAnswer(message)
    return amount


@dataclass(frozen=True, slots=True)
class Sizes:
    """The smallest plans of many requirements, as arrays of one shape; NaN where there is none.

    Parameters
    ----------
    amount : ndarray of float
        Items, or units.
    reject : ndarray of float
        The critical count: the plan rejects from it on (side above), or up to it (side below).
    size, power : ndarray of float
        The actual size, and the power at the rate to catch.
    """

    amount: Floats
    reject: Floats
    size: Floats
    power: Floats


def smallest_sizes(
    kind_name: str,
    claim: Any,
    alpha: Any,
    catch: Any,
    power: Any,
    *,
    side: str = "above",
    lasting: bool = False,
    extra: Any = None,
    whole: bool = True,
) -> Sizes:
    """Return the smallest plans of many one-sided requirements on counts at once.

    Parameters
    ----------
    kind_name : str
        A kind of plan that rejects by a count.
    claim, alpha, catch, power : float or ndarray
        They broadcast. Rates are in the parameter's own unit; on finite lots that is a number of items.
    side : {"above", "below"}
        Where the rate to catch lies.
    lasting : bool
        See `smallest_plan`.
    extra : int or ndarray, optional
        The lots, for the kinds that need them.
    whole : bool
        Whether the amounts are whole numbers.

    Returns
    -------
    Sizes
        NaN where a requirement is refused or no plan is small enough.

    Examples
    --------
    >>> found = smallest_sizes("binomial", [0.05, 0.2], 0.05, [0.2, 0.4], 0.8)
    >>> found.amount.tolist(), found.reject.tolist()
    ([27.0, 35.0], [4.0, 12.0])
    """
    kind, side = kind_named(kind_name), read_choice(side, "side", ("above", "below"))
    law, extra_field = count_law(kind), kind.grammar.extra
    if kind.grammar.base:
        message = (
            f"many sizes at once are sought for plans without further fields, not for {kind.grammar.kind}"
        )
        raise NoAnswer(message)
    given = (claim, catch, alpha, power, *([extra] if extra_field else []))
    arrays = np.broadcast_arrays(*(np.asarray(number, dtype=float) for number in given))
    rate, aim, level, target, *rest = (array.ravel() for array in arrays)
    columns = {extra_field: rest[0]} if extra_field else {}
    rate, aim = (kind.parameters[0].convert(rates, columns) for rates in (rate, aim))
    falser = aim > rate if side == "above" else aim < rate
    sound = np.flatnonzero(falser & (level > 0) & (level < target) & (target < 1))
    columns = {name: column[sound] for name, column in columns.items()}
    rate, aim, level, target = (array[sound] for array in (rate, aim, level, target))
    answers = _solve(Requirements(law, columns, side, rate, aim, level, target, whole), lasting)
    spread = np.full((len(answers), arrays[0].size), np.nan)
    spread[:, sound] = answers
    return Sizes(*spread.reshape(len(answers), *arrays[0].shape))


def _solve(asked: Requirements, lasting: bool) -> tuple[Floats, ...]:
    """Return amount, critical count, size and power of each requirement."""
    law, end = asked.law, ENDS[asked.side][0]
    amount = asked.lasting() if lasting else asked.first()
    found = np.isfinite(amount)
    columns = {**asked.columns, law.amount: np.where(found, amount, 1.0)}
    count = law.critical(columns, asked.claim, asked.alpha, end, ONE_SIDED)
    tail = law.at_least if end == "high" else law.at_most
    numbers = (amount, count, tail(count, columns, asked.claim), tail(count, columns, asked.catch))
    return tuple(np.where(found, number, np.nan) for number in numbers)


def count_law(kind: Kind) -> CountLaw:
    """Return the law of a kind that rejects by a count; raise `NoAnswer` for other kinds."""
    law = getattr(kind, "law", None)
    if isinstance(law, CountLaw):
        return law
    message = f"a plan of kind {kind.grammar.kind} does not reject by a count"
    raise NoAnswer(message)
