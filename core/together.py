"""Several characteristics on one sample: each has its own plan, and the lot fails if one of them fails it.

The chances multiply where the characteristics are independent of each other: an item's defect in one says
nothing of the others. Without that assumption the chance to fail at least one is still at most the sum of
the single chances (Boole's inequality), so keeping the sum below a limit is safe however they are tied.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import read_choice, read_probability, read_whole
from steelyard.core.plan import Plan
from steelyard.core.questions import not_rejected, power

RELATIONS = ("independent", "any")


def failing(plan: Plan, *rates: Any) -> float:
    """Return the chance that the lot fails, accurate where it is small."""
    return power(plan, *rates) if plan.verdict == "fail" else not_rejected(plan, *rates)


def together(plans: Sequence[Plan], rates: Sequence[Any], relation: str = RELATIONS[0]) -> float:
    """Return the chance that a lot fails at least one of several characteristics.

    Parameters
    ----------
    plans : sequence of Plan
        One for each characteristic, of any kinds.
    rates : sequence of float, int or str
        The true rate of each, as typed.
    relation : {"independent", "any"}
        Whether the characteristics are independent of each other; ``"any"`` gives the highest chance that
        any dependence between them allows.

    Raises
    ------
    InvalidValue
        When there are not as many rates as plans, or a rate is refused.

    Examples
    --------
    >>> from steelyard.core.text import read_plan
    >>> plans = [read_plan(f"binomial | n 50 | reject x>={count}") for count in (2, 4)]
    >>> round(together(plans, [0.005, 0.02]), 5), round(together(plans, [0.005, 0.02], "any"), 5)
    (0.04343, 0.04389)
    """
    relation = read_choice(relation, "relation", RELATIONS)
    if len(plans) != len(rates):
        raise InvalidValue("rates", f"be as many as the plans ({len(plans)})", len(rates))
    chances = [failing(plan, rate) for plan, rate in zip(plans, rates, strict=True)]
    if relation == "any" or 1.0 in chances:
        return min(1.0, math.fsum(chances))
    return -math.expm1(math.fsum(math.log1p(-chance) for chance in chances))


def share_of_alpha(whole: Any, characteristics: Any, relation: str = RELATIONS[0]) -> float:
    """Return the alpha for each characteristic that keeps the chance to fail at least one below a limit.

    Parameters
    ----------
    whole : float or str
        The limit, strictly between 0 and 1.
    characteristics : int
        How many are judged on the sample.
    relation : {"independent", "any"}
        See `together`. With ``"any"`` the share is smaller and always safe.

    References
    ----------
    Z. Šidák, J. Amer. Statist. Assoc. 62 (1967), 626-633, for independent ones; C. E. Bonferroni, 1936, for
    any (both from memory).

    Examples
    --------
    >>> round(share_of_alpha("5%", 4), 6), share_of_alpha("5%", 4, "any")
    (0.012741, 0.0125)
    """
    limit = read_probability(whole, "whole")
    count = read_whole(characteristics, "characteristics", 1)
    if read_choice(relation, "relation", RELATIONS) == "any":
        return limit / count
    return -math.expm1(math.log1p(-limit) / count)
