"""What plans that compare two samples have in common: a claim on two parameters, a pair of sample sizes.

The claim is about the second sample and refers to the first: ``p2<=p1``, or with a margin ``p2<=p1+0.1``.
The rule is not written: it follows from the claim, alpha and the test.
"""

from __future__ import annotations

import re
from bisect import bisect_left
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.kind import Kind, claim_of
from steelyard.core.numbers import read_number, write_number
from steelyard.core.plan import RELATIONS, Claim, Plan, Reject, split_claim


@dataclass(frozen=True, slots=True)
class Derived:
    """The rule of a plan that follows from its claim, its alpha and its test."""


def derived_fields() -> dict[str, Any]:
    """Return the grammar's part that is alike wherever the rule is not written."""
    return {"rules": (), "read_rule": lambda texts, design: Derived(), "write_rule": lambda rule: {}}


def read_pair(read: Callable[[Any, str], Any], example: str) -> Callable[[Any, str], Any]:
    """Return a reader of two values, one for each sample, such as ``50 and 60``."""

    def pair(value: Any, name: str) -> Any:
        parts = value.lower().split(" and ") if isinstance(value, str) else value
        if not isinstance(parts, list | tuple) or len(parts) != 2:
            raise InvalidValue(name, f"have the form {example}", value)
        return tuple(read(part, name) for part in parts)

    return pair


def write_pair(values: tuple[float, ...]) -> str:
    """Return two values as plan text writes them."""
    return " and ".join(map(write_number, values))


def read_versus(value: Any, read: Callable[[Any, str], Any], example: str) -> tuple[Any, Any]:
    """Return what was observed of both samples, from a text such as ``3 vs 9``.

    Raises
    ------
    InvalidValue
        When the text has another form.
    """
    parts = re.split(r"\bvs\b", value.lower()) if isinstance(value, str) else []
    if len(parts) != 2:
        raise InvalidValue("observed", f"have the form {example}", value)
    first, second = (read(part.strip(), "observed") for part in parts)
    return first, second


@dataclass(frozen=True, slots=True)
class Pairing:
    """What two samples, whose sizes are sought, must do.

    Parameters
    ----------
    sized : callable
        From the items of the first sample to a design; the second sample follows.
    most : int
        The most items of the first sample.
    claim : Claim
    alpha : float
    truth : tuple of float
        The true values in both samples.
    power : float
        The least power there.
    """

    sized: Callable[[int], Any]
    most: int
    claim: Claim
    alpha: float
    truth: tuple[float, ...]
    power: float


class ComparingKind(Kind):
    """A kind whose claim compares the second of its two parameters with the first.

    Attributes
    ----------
    most : int
        The most items of either sample.
    test : str
        The test of a plan that names none; empty where there is only one.
    """

    most: int
    test = ""

    def completed(self, values: dict[str, Any]) -> dict[str, Any]:
        """Return a design's values, with the usual test where none is named."""
        chosen = values.get("test") or self.test
        return {**values, "test": chosen} if chosen else values

    def read_claim(self, text: str, design: Any) -> Claim:
        """Return the claim that ``p2<=p1`` or ``p2<=p1+0.1`` makes.

        Raises
        ------
        InvalidValue
            When the text has another form.
        """
        first, second = (parameter.symbol for parameter in self.parameters[:2])
        example = f"compare {second} with {first}, e.g. {second}<={first}"
        symbol, relation, value = split_claim(text)
        other, shift = value[: len(first)].lower(), value[len(first) :].replace(" ", "")
        if symbol.lower() != second or other != first or (shift and shift[0] not in "+-"):
            raise InvalidValue("claim", example, text)
        return Claim(second, relation, read_number(shift, "claim") if shift else 0.0, first)

    def claimed(self, side: str, shift: float = 0.0) -> Claim:
        """Return the claim of a side."""
        first, second = (parameter.symbol for parameter in self.parameters[:2])
        return Claim(second, RELATIONS[side], shift, first)

    def check_claim(self, claim: Claim, design: Any) -> None:
        """Refuse a claim that is no comparison, or has a margin."""
        del design
        example = f"{self.parameters[1].symbol}<={self.parameters[0].symbol}"
        if not claim.reference:
            raise InvalidValue("claim", f"compare both samples, e.g. {example}", str(claim))
        if claim.value:
            raise InvalidValue("claim", f"have no margin, e.g. {example}", str(claim))

    def verify(self, plan: Plan) -> None:
        """Refuse a plan from which no rule follows."""
        if plan.claim is None:
            example = f"{self.parameters[1].symbol}<={self.parameters[0].symbol}"
            raise InvalidValue("claim", "be written in the plan: the rule follows from it", None, example)
        if plan.alpha is None:
            raise InvalidValue("alpha", "be written in the plan: the rule follows from it", None)
        self.check_claim(plan.claim, plan.design)
        self.critical_rule(plan.design, plan.claim, plan.alpha, plan.split)

    def critical_rule(self, design: Any, claim: Claim, alpha: float, split: str) -> Derived:
        """Return the rule, which is not written."""
        del design, claim, alpha, split
        return Derived()

    def reaches(self, wanted: Pairing, first: int) -> bool:
        """Tell whether samples of a size have the power; samples too small to reject have none."""
        plan = Plan(self.grammar.kind, wanted.sized(first), Derived(), wanted.claim, wanted.alpha)
        try:
            self.verify(plan)
        except InvalidValue:
            return False
        rates = [np.array([value]) for value in wanted.truth]
        return bool(self.reject(self.columns([plan]), *rates)[0] >= wanted.power)

    def smallest_first(self, wanted: Pairing) -> int | None:
        """Return the least items of the first sample with which the power is reached; None for none."""
        counts = range(self.grammar.least, wanted.most + 1)
        found = bisect_left(counts, True, key=lambda first: self.reaches(wanted, first))
        return counts[found] if found < len(counts) else None

    def given_rule(self, rule: Reject) -> Any:
        """Refuse: the rule follows from the claim."""
        message = f"a plan of kind {self.grammar.kind} takes no rule from outside: alpha gives it"
        raise NoAnswer(message)

    def follows_split(self, plan: Plan) -> bool:
        """Return True: the rule is always that of alpha."""
        del plan
        return True

    def limit(self, plan: Plan, observed: Any, end: str, miss: float) -> float:
        """Refuse: the tests of counts are not inverted."""
        del observed, end, miss
        message = f"a plan of kind {plan.kind} has no confidence limit"
        raise NoAnswer(message)


def alpha_of(plan: Plan) -> float:
    """Return alpha, which every plan of two samples has."""
    assert plan.alpha is not None
    return plan.alpha


def side_of(plan: Plan) -> str:
    """Return where the second parameter lies, seen from the first, when the claim is false."""
    return str(claim_of(plan).side)
