"""What only some kinds of plan can do, as small protocols; a question asks for the ability it needs."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, Protocol, runtime_checkable

import numpy as np

from steelyard.core.endings import Endings
from steelyard.core.errors import NoAnswer
from steelyard.core.kind import Kind
from steelyard.core.need import Need
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Claim, Plan
from steelyard.core.priors import Prior
from steelyard.core.walk import Look


@runtime_checkable
class RuleMaking(Protocol):
    """A kind whose rule follows from a claim and alpha."""

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Any:
        """Return the rule of the largest region that keeps alpha."""


@runtime_checkable
class Deciding(Protocol):
    """A kind that decides on an observed result."""

    def read_observed(self, value: Any, plan: Plan) -> Any:
        """Return what was observed, from a cell's number or text."""

    def outcome(self, plan: Plan, observed: Any) -> bool | str:
        """Tell whether the claim is rejected, or say what to do next."""


@runtime_checkable
class Judging(Deciding, Protocol):
    """A kind that weighs an observed result: p-values and confidence limits."""

    def follows_split(self, plan: Plan) -> bool:
        """Tell whether the rule is a region of the plan's own p-value, unlike some rules from outside."""

    def p_value(self, plan: Plan, observed: Any) -> float:
        """Return the p-value of what was observed."""

    def limit(self, plan: Plan, observed: Any, end: str, miss: float) -> float:
        """Return the confidence limit ``"lower"`` or ``"upper"`` at confidence 1 - miss."""


@runtime_checkable
class Estimating(Deciding, Protocol):
    """A kind that estimates the fraction outside limits from what was measured."""

    def estimate(self, plan: Plan, observed: Any) -> float:
        """Return the estimated fraction."""


@runtime_checkable
class Remarking(Protocol):
    """A kind whose plans need a word more than the sentences that every plan gets."""

    def remarks(self, plan: Plan) -> list[str]:
        """Return sentences for a report, each at most 255 characters."""


@runtime_checkable
class Forecasting(Protocol):
    """A kind whose power has a closed form over an uncertain rate."""

    def prior(self, plan: Plan, a: float, b: float) -> Prior:
        """Return what is known of the rate; raise `NoAnswer` where no family of priors fits."""

    def paths(self, plan: Plan) -> Sequence[tuple[Sequence[Look], bool]]:
        """Return looks that reject: from their reject number on (True), or up to their accept number."""


@runtime_checkable
class Sizable(Protocol):
    """A kind whose amount can be sought: how much must be inspected for two risks."""

    def smallest_amount(self, need: Need, lasting: bool) -> float:
        """Return the first amount that meets a need, or the lasting one; NaN where none does."""


@runtime_checkable
class Averaging(Protocol):
    """A kind whose plans say how much they inspect on average: a single plan always the same."""

    def average_amount(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the average sample number, in items or units; columns and rates broadcast."""


@runtime_checkable
class Inspecting(Protocol):
    """A kind whose inspection of a lot ends in known ways: of single plans one, after the whole sample."""

    def endings(self, plan: Plan, rate: Floats) -> Endings:
        """Return the ways to end and their chances, at rates of shape ``(rates,)``."""

    def left(self, plan: Plan, rate: Floats, lot: float) -> Floats:
        """Return how many defectives a lot keeps in what is not inspected, on average; none if it fails."""


@runtime_checkable
class Stepping(Protocol):
    """A kind that may decide several times."""

    def steps(self, plan: Plan) -> list[tuple[float, int | None, int | None]]:
        """Return amounts inspected, and the acceptance and rejection numbers from there on; None for none."""


@runtime_checkable
class Bordering(Protocol):
    """A kind that rejects pairs of counts."""

    def borders(self, plan: Plan) -> list[tuple[int, int | None, int | None]]:
        """Return for each first count up to and from which second count it rejects; None for none."""


def rule_making(kind: Kind) -> RuleMaking:
    """Return the kind as one whose rules follow from a claim and alpha, or raise `NoAnswer`."""
    if isinstance(kind, RuleMaking):
        return kind
    raise _lacking(kind, "rule that follows from alpha alone")


def deciding(kind: Kind) -> Deciding:
    """Return the kind as one that decides on a result; raise `NoAnswer` if it does not."""
    if isinstance(kind, Deciding):
        return kind
    raise _lacking(kind, "decision on an observed result")


def judging(kind: Kind, what: str) -> Judging:
    """Return the kind as one that weighs results; raise `NoAnswer`, naming `what` it lacks."""
    if isinstance(kind, Judging):
        return kind
    raise _lacking(kind, what)


def estimating(kind: Kind) -> Estimating:
    """Return the kind as one that estimates a fraction; raise `NoAnswer` if it does not."""
    if isinstance(kind, Estimating):
        return kind
    raise _lacking(kind, "estimate of a fraction outside limits")


def sizable(kind: Kind) -> Sizable:
    """Return the kind as one whose amount can be sought; raise `NoAnswer` if it can't be."""
    if isinstance(kind, Sizable):
        return kind
    raise _lacking(kind, "search for the smallest plan")


def averaging(kind: Kind) -> Averaging:
    """Return the kind as one with an average sample number; raise `NoAnswer` if it has none."""
    if isinstance(kind, Averaging):
        return kind
    raise _lacking(kind, "average sample number")


def average_or_nothing(kind: Kind) -> Callable[..., Floats]:
    """Return the vectorised average sample of a kind; NaN everywhere where it has none."""
    if isinstance(kind, Averaging):
        return kind.average_amount

    def nothing(columns: Columns, *rates: Floats) -> Floats:
        shapes = [array.shape for array in (*columns.values(), *rates)]
        return np.full(np.broadcast_shapes(*shapes), np.nan)

    return nothing


def inspecting(kind: Kind, what: str) -> Inspecting:
    """Return the kind as one whose ways to end are known; raise `NoAnswer`, naming `what` it lacks."""
    if isinstance(kind, Inspecting):
        return kind
    raise _lacking(kind, what)


def stepping(kind: Kind) -> Stepping:
    """Return the kind as one that may decide several times; raise `NoAnswer` if it does once only."""
    if isinstance(kind, Stepping):
        return kind
    raise _lacking(kind, "steps: it decides once, see SY_REGION")


def forecasting(kind: Kind) -> Forecasting:
    """Return the kind as one whose power can be averaged; raise `NoAnswer` if it can't be."""
    if isinstance(kind, Forecasting):
        return kind
    raise _lacking(kind, "closed form for its power over an uncertain rate")


def bordering(kind: Kind) -> Bordering:
    """Return the kind as one that rejects pairs of counts; raise `NoAnswer` if it does not."""
    if isinstance(kind, Bordering):
        return kind
    raise _lacking(kind, "pairs of counts; see SY_REGION")


def _lacking(kind: Kind, what: str) -> NoAnswer:
    return NoAnswer(f"a plan of kind {kind.grammar.kind} has no {what}")
