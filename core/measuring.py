"""Plans by measurement from what people ask for: two risk points, or a capability to be shown."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from steelyard.core.claims import claim_from
from steelyard.core.errors import InvalidValue
from steelyard.core.kind import claim_of
from steelyard.core.kinds.variables import VARIABLES, VERDICTS
from steelyard.core.need import need_of
from steelyard.core.numbers import read_choice, read_number, read_probability, read_whole, typed
from steelyard.core.parameter import show_rate
from steelyard.core.plan import Claim, Plan
from steelyard.core.regions import make_plan
from steelyard.core.smallest import plan_for
from steelyard.core.specification import Limits
from steelyard.core.tails_continuous import normal_at_most
from steelyard.core.tolerance import two_sided_factor

MEASURES = ("ppk", "coverage")
MOST_PPK = 10
LEAST = 0.001  # of a Ppk or a coverage; below it nothing is shown


def variables_plan(
    claim: Any,
    alpha: Any,
    catch: Any,
    power: Any,
    sigma: float | None = None,
    lower: float | None = None,
    upper: float | None = None,
) -> Plan:
    """Return the smallest plan by measurement that keeps alpha at the claim and reaches a power.

    Parameters
    ----------
    claim : float, int or str
        A fraction outside the limits, as typed, or a relation: ``"p>=5%"`` makes a demonstration.
    alpha, power : float or str
        Probabilities as typed; the power is the greater.
    catch : float, int or str
        The fraction at which the claim shall be rejected with that power.
    sigma : float, optional
        The known standard deviation; without it, that of the sample is used.
    lower, upper : float, optional
        The limits. Without any the plan is for one limit, whose value is left open.

    Raises
    ------
    InvalidValue
        When a value is refused, or two limits so close that no mean has so small a fraction outside.

    Examples
    --------
    >>> plan = variables_plan("1%", "5%", "5%", "90%", sigma=0.3)
    >>> plan.design.n, round(plan.rule.k, 4)
    (19, 1.949)
    """
    design = Limits(2, lower, upper, sigma)
    stated = claim_from(VARIABLES, claim, None, design)
    VARIABLES.check_claim(stated, design)
    asked = Plan("variables", design, None, stated)
    need = need_of(asked, catch, power, read_probability(alpha, "alpha"))
    return plan_for(need, verdict=VERDICTS[stated.relation])


@dataclass(frozen=True, slots=True)
class Capability:
    """What a sample must show of a capability, and the test that this is.

    Parameters
    ----------
    plan : Plan
        Rejecting its claim, that too much lies beyond a limit, shows the capability.
    outside : float
        What lies outside two limits that both just have the capability.
    one, two : float
        Tolerance factors k: with confidence, no more than allowed lies beyond ``mean + k s``, and no more
        than `outside` lies outside of ``mean - k s`` and ``mean + k s``.
    """

    plan: Plan
    outside: float
    one: float
    two: float

    def sentences(self) -> list[str]:
        """Return the test in words."""
        claim, alpha = claim_of(self.plan), self.plan.alpha
        assert alpha is not None
        beyond, outside, one, two = show_rate(claim.value), show_rate(self.outside), self.one, self.two
        return [
            f"Test: the claim that {beyond} or more lies beyond a limit is rejected, at alpha "
            f"{show_rate(alpha)}, if (limit - mean)/s is at least {one:.4g}"
            f": a sample's Ppk of at least {one / 3:.4g}.",
            f"One limit: with that confidence at most {beyond} lies beyond mean + {one:.4g} s.",
            f"Two limits: with that confidence at most {outside} lies outside mean +- {two:.4g} s.",
            "Holds for a stable, normal process only, with s from all values together.",
        ]


def capability(n: Any, target: Any, confidence: Any = 0.95, measure: str = "ppk") -> Capability:
    """Return what n measurements must show for a capability, with a confidence.

    Parameters
    ----------
    n : int
        Items measured, at least 2.
    target : float
        The Ppk to be shown, such as 1.33; or the fraction inside, such as 0.95.
    confidence : float or str
        Strictly between 0 and 1.
    measure : {"ppk", "coverage"}
        What the target is.

    Raises
    ------
    InvalidValue
        When a value is refused.

    Notes
    -----
    The true Ppk is the distance of the mean from the nearer limit in three standard deviations. It is at
    least c just when both distances are at least 3 c; so one factor serves one limit and two.

    Examples
    --------
    >>> found = capability(30, 1.33)
    >>> round(found.one / 3, 3), round(found.one, 3), round(found.two, 3)
    (1.72, 5.159, 5.186)
    """
    count, level = read_whole(n, "n", 2), read_probability(confidence, "confidence")
    beyond, outside = _allowed(target, read_choice(measure, "measure", MEASURES))
    alpha = float(1 - typed(level))
    plan = make_plan("variables", Limits(count), Claim("p", ">=", beyond), alpha, verdict="pass")
    return Capability(plan, outside, plan.rule.k, two_sided_factor(count, outside, level))


def _allowed(target: Any, measure: str) -> tuple[float, float]:
    """Return the fraction allowed beyond one limit, and outside two."""
    if measure == "coverage":
        coverage = read_probability(target, "target")
        if coverage < LEAST:
            raise InvalidValue("target", f"be a coverage of at least {LEAST}", target)
        outside = float(1 - typed(coverage))
        return outside, outside
    ppk = read_number(target, "target")
    if not LEAST <= ppk <= MOST_PPK:
        raise InvalidValue("target", f"be a Ppk from {LEAST} to {MOST_PPK}", target)
    beyond = float(normal_at_most(-3 * ppk))
    return beyond, 2 * beyond
