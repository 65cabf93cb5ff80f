"""Demonstration plans: how many items must be inspected to show that a rate is low.

To show "at most 1 %, with 95 % confidence" is to reject the claim that the rate is 1 % or more, at alpha 5 %:
such plans are tests, and rejecting their claim passes the lot.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from steelyard.core.claims import claim_from
from steelyard.core.designs import design_from, kind_named
from steelyard.core.errors import NoAnswer
from steelyard.core.numbers import read_probability, read_whole, typed
from steelyard.core.parameter import Floats
from steelyard.core.plan import Plan
from steelyard.core.regions import make_plan
from steelyard.core.smallest import count_law
from steelyard.core.splits import Truth, first_whole, within


def demonstration(worst_rate: Any, confidence: Any, allowed: Any = 0, lot: Any = None) -> Plan:
    """Return the smallest plan that shows a rate to be below the worst acceptable one.

    Parameters
    ----------
    worst_rate : float, int or str
        The rate to rule out, as typed. On a finite lot a proportion becomes a whole number of defectives,
        rounded upwards.
    confidence : float or str
        Strictly between 0 and 1.
    allowed : int
        How many defectives the sample may show and still pass.
    lot : int, optional
        Size of a finite lot; without it the plan is about a process.

    Raises
    ------
    InvalidValue
        When a value is refused.
    NoAnswer
        When no allowed size is large enough.

    Examples
    --------
    >>> from steelyard.core.text import write_plan
    >>> write_plan(demonstration("1%", "95%"))
    'binomial | n 299 | claim p>=0.01 | alpha 0.05 | reject x<=0 | verdict pass'
    >>> [demonstration("5%", "95%", allowed).design.n for allowed in range(6)]
    [59, 93, 124, 153, 181, 208]
    >>> write_plan(demonstration("5%", "95%", lot=60))
    'hypergeometric | lot 60 | n 38 | claim D>=3 | alpha 0.05 | reject x<=0 | verdict pass'
    """
    alpha = float(1 - typed(read_probability(confidence, "confidence")))
    kind = kind_named("binomial" if lot is None else "hypergeometric")
    law, fields = count_law(kind), {} if lot is None else {"lot": lot}
    design = design_from(kind, {**fields, law.amount: 1})
    claim = claim_from(kind, worst_rate, "below", design)
    kind.check_claim(claim, design)
    passes = np.array(float(read_whole(allowed, "allowed")))
    columns = {name: np.array(float(value)) for name, value in fields.items()}
    largest = float(law.largest(columns))

    def shown(amount: Floats) -> Truth:
        row = {**columns, law.amount: np.minimum(amount, largest)}
        return within(law, row, np.array(claim.value), [(1, "low", passes)], alpha)

    if passes >= largest or not shown(np.array(largest)):
        message = f"no sample of up to {largest:.0f} with {passes:.0f} allowed can reject the claim {claim}"
        raise NoAnswer(message)
    amount = float(first_whole(shown, passes + 1))
    return make_plan(
        kind.grammar.kind, design_from(kind, {**fields, law.amount: amount}), claim, alpha, verdict="pass"
    )
