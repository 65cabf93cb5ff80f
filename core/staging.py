"""Plans in stages from what people type."""

from __future__ import annotations

from typing import Any

from steelyard.core.claims import claim_from
from steelyard.core.designs import design_from
from steelyard.core.kind import KINDS, Kind
from steelyard.core.numbers import read_choice
from steelyard.core.plan import Plan
from steelyard.core.staged import StagedKind


def staged_kind(name: str) -> Kind:
    """Return the staged kind of a law, named by the word that opens its plans.

    Raises
    ------
    InvalidValue
        With the list of laws.
    """
    staged = [kind for kind in KINDS.values() if isinstance(kind, StagedKind) and not kind.grammar.base]
    found = {kind.grammar.head: kind for kind in staged}
    return found[read_choice(name, "kind", tuple(found))]


def plan_in_stages(
    kind_name: str,
    sizes: Any,
    accepts: Any,
    rejects: Any,
    claim: Any = None,
    lot: Any = None,
    stop: str | None = None,
    alpha: float | None = None,
) -> Plan:
    """Return a double or multiple plan.

    Parameters
    ----------
    kind_name : str
        ``"binomial"``, ``"poisson"`` or ``"hypergeometric"``.
    sizes : str or number
        How much each stage inspects, e.g. ``"50 then 50"``.
    accepts, rejects : str or number
        The numbers after each stage, e.g. ``"1 then 4"``; ``none`` where a stage can't accept or reject.
    claim : float, int or str, optional
        A rate as typed, e.g. ``"2%"``, or the relation ``"p<=2%"``.
    lot : int, optional
        For ``"hypergeometric"``.
    stop : {"stage-end", "on-reject", "on-decision"}, optional
        See `steelyard.core.stages.Stages`.
    alpha : float, optional
        The significance level that the plan is said to keep.

    Examples
    --------
    >>> import steelyard.core.kinds
    >>> from steelyard.core.text import write_plan
    >>> write_plan(plan_in_stages("binomial", "50 then 50", "1 then 4", "4 then 5", "2%"))
    'binomial | stages 50 then 50 | accept 1 then 4 | reject 4 then 5 | claim p<=0.02'
    """
    kind = staged_kind(kind_name)
    values = {"stages": sizes, "stop": stop, **({} if lot is None else {"lot": lot})}
    design = design_from(kind, values)
    rule = kind.grammar.read_rule({"accept": accepts, "reject": rejects}, design)
    stated = None if claim is None else claim_from(kind, claim, None, design)
    plan = Plan(kind.grammar.kind, design, rule, stated, alpha)
    kind.verify(plan)
    return plan
