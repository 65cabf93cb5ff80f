"""Claims as a cell gives them: a bare rate with a side, or the whole relation as text."""

from __future__ import annotations

from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.kind import Kind
from steelyard.core.plan import RELATIONS, Claim


def claim_from(kind: Kind, value: Any, side: str | None, design: Any) -> Claim:
    """Return the claim that a value and a side make.

    Parameters
    ----------
    kind : Kind
    value : float, int or str
        A rate as typed, e.g. 0.02 or ``"2%"``, or the relation, e.g. ``"p<=2%"``.
    side : {"above", "below", "either"}, optional
        Where the true rate lies when the claim is false; taken from the relation where there is one,
        ``"above"`` otherwise.
    design : object
        The plan's design; finite lots need it to turn a proportion into a number of defectives.

    Raises
    ------
    InvalidValue
        When a relation and a side contradict each other, or the value is refused.
    """
    if isinstance(value, str) and any(sign in value for sign in "<>=≤≥"):
        claim = kind.read_claim(value, design)
        if side is not None and claim.side != side:
            raise InvalidValue("side", f"be {claim.side} for the claim {value.strip()}", side)
        return claim
    parameter, relation = kind.parameters[0], RELATIONS[side or "above"]
    return Claim(parameter.symbol, relation, parameter.claimed(value, relation, design))
