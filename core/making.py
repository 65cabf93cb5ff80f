"""Plans from what people ask for: a claim and alpha, a rule from outside, or two risks."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from steelyard.core.claims import claim_from
from steelyard.core.designs import design_from, extent_values, kind_named
from steelyard.core.plan import Plan, Reject
from steelyard.core.regions import make_plan
from steelyard.core.smallest import smallest_plan


def plan_from_claim(
    kind_name: str,
    values: dict[str, Any],
    claim: Any,
    alpha: float,
    side: str | None = None,
    split: str = "half",
    verdict: str = "fail",
) -> Plan:
    """Return the plan of a given size whose rule follows from its claim and alpha.

    Parameters
    ----------
    kind_name : str
    values : dict
        The design's numbers by name, e.g. ``{"n": 50}``.
    claim : float, int or str
        A rate as typed, or a relation such as ``"p<=2%"``.
    alpha : float
        Nominal significance level.
    side : {"above", "below", "either"}, optional
        Taken from the claim's relation where it has one, ``"above"`` otherwise.
    split, verdict : str
        See `Plan`.

    Examples
    --------
    >>> from steelyard.core.text import write_plan
    >>> write_plan(plan_from_claim("binomial", {"n": 50}, "2%", 0.05))
    'binomial | n 50 | claim p<=0.02 | alpha 0.05 | reject x>=4'
    """
    kind = kind_named(kind_name)
    design = design_from(kind, values)
    return make_plan(kind.grammar.kind, design, claim_from(kind, claim, side, design), alpha, split, verdict)


def plan_from_rule(
    kind_name: str,
    extent: Any,
    reject_from: float | None,
    reject_to: float | None,
    claim: Any = None,
    extra: Any = None,
    alpha: float | None = None,
    verdict: str = "fail",
) -> Plan:
    """Return a plan whose rule comes from outside; it is judged, never recomputed.

    Examples
    --------
    >>> from steelyard.core.text import write_plan
    >>> write_plan(plan_from_rule("binomial", 125, 4, None))
    'binomial | n 125 | reject x>=4'
    """
    kind = kind_named(kind_name)
    design = design_from(kind, extent_values(kind, extent, extra))
    rule = kind.given_rule(Reject(reject_to, reject_from))
    plan = Plan(kind.grammar.kind, design, rule, alpha=alpha, verdict=verdict)
    if claim is not None:
        one_sided = "above" if kind.rises(plan) else "below"
        side = one_sided if None in (reject_from, reject_to) else "either"
        plan = replace(plan, claim=claim_from(kind, claim, _implied(claim, side), design))
    kind.verify(plan)
    return plan


def _implied(claim: Any, side: str) -> str | None:
    """Let a bare rate take the rule's side; a relation speaks for itself."""
    return None if isinstance(claim, str) and any(sign in claim for sign in "<>=≤≥") else side


def smallest_from(
    kind_name: str,
    claim: Any,
    alpha: float,
    catch: Any,
    power: float,
    side: str | None = None,
    order: str = "first",
    extra: Any = None,
    split: str = "half",
    verdict: str = "fail",
) -> Plan:
    """Return the smallest plan that keeps alpha at the claim and reaches a power at the rate to catch.

    Parameters
    ----------
    catch : float, int or str
        One rate, or for ``side="either"`` also two as ``"1% and 5%"``.
    order : {"first", "lasting"}
        The first size that reaches the power, or the size from which on it never falls short.

    Examples
    --------
    >>> from steelyard.core.text import write_plan
    >>> write_plan(smallest_from("binomial", "5%", 0.05, "20%", 0.8))
    'binomial | n 27 | claim p<=0.05 | alpha 0.05 | reject x>=4'
    """
    kind = kind_named(kind_name)
    return smallest_plan(
        kind.grammar.kind, claim, alpha, catch, power,
        side=side, lasting=order == "lasting", extra=extra, split=split, verdict=verdict,
    )  # fmt: skip
