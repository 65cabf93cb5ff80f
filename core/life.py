"""Life tests from what people ask for: a claim, a way to stop, and how long, or how long at least."""

from __future__ import annotations

from typing import Any

from steelyard.core.claims import claim_from
from steelyard.core.designs import design_from
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import Kind
from steelyard.core.kinds.failures import demonstration_clock, demonstration_time
from steelyard.core.kinds.life import CLOCK, FAILURE_TIME, TOTAL_TIME
from steelyard.core.numbers import read_choice, read_probability, read_whole
from steelyard.core.plan import Claim, Plan
from steelyard.core.regions import make_plan

KINDS_BY_STOP: dict[str, Kind] = {"time": TOTAL_TIME, "failures": FAILURE_TIME, "clock": CLOCK}
STOPS = tuple(KINDS_BY_STOP)


def life_plan(
    claim: Any,
    alpha: Any = 0.05,
    amount: Any = None,
    stop: str = "time",
    units: Any = None,
    *,
    side: str | None = None,
    split: str = "half",
    verdict: str | None = None,
    allowed: Any = 0,
) -> Plan:
    """Return a life test whose rule follows from its claim and alpha.

    Parameters
    ----------
    claim : float or str
        A mean life, or a relation: ``"life<=1000"`` to show a longer life, ``"life>=1000"`` to catch a
        shorter one.
    alpha : float or str
        Nominal significance level.
    amount : float or int, optional
        The total time on test, the number of failures to stop at, or the time on the clock. Left out, the
        least time is taken in which `allowed` failures still show a longer life.
    stop : {"time", "failures", "clock"}
        What ends the test.
    units : int, optional
        Units on test, for a fixed clock.
    side : {"above", "below", "either"}, optional
        Taken from the claim's relation where it has one, ``"above"`` otherwise.
    split : {"half", "nearest", "rarest"}
        How a two-sided test shares alpha.
    verdict : {"fail", "pass"}, optional
        Left out, showing a longer life passes, anything else fails.
    allowed : int
        Failures that shall still show a longer life, where the amount is left out.

    Raises
    ------
    InvalidValue
        When a value is refused, or missing for the way to stop.

    Examples
    --------
    >>> from steelyard.core.text import write_plan
    >>> write_plan(life_plan("life<=1000", "10%", 2500))
    'life | time 2500 | claim life<=1000 | alpha 0.1 | reject failures<=0 | verdict pass'
    >>> round(life_plan("life<=1000", "10%").design.time, 4)
    2302.5851
    """
    kind, level = KINDS_BY_STOP[read_choice(stop, "stop", STOPS)], read_probability(alpha, "alpha")
    stated = claim_from(kind, claim, side, None)
    if amount is None:
        amount = _least(stated, level, stop, units, allowed)
    fields = {"units": units, "clock": amount} if stop == "clock" else {stop: amount, "units": units}
    design = design_from(kind, fields)
    usual = "pass" if stated.side == "above" else "fail"
    return make_plan(kind.grammar.kind, design, stated, level, split, verdict or usual)


def _least(claim: Claim, alpha: float, stop: str, units: Any, allowed: Any) -> float:
    """Return the least time in which so many failures show a longer life."""
    if claim.side != "above" or stop == "failures":
        raise InvalidValue("amount", "be given, except to show a longer life in the least time", None)
    passes = read_whole(allowed, "allowed", 0, 10_000)
    if stop == "time":
        return demonstration_time(claim.value, alpha, passes)
    count = read_whole(units, "units", 1)
    if passes >= count:
        raise InvalidValue("allowed", f"be less than the units on test, {count}", passes)
    return demonstration_clock(claim.value, alpha, passes, count)
