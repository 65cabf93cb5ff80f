"""The one face of every kind of plan, and the register of kinds.

A kind is one module below `steelyard.core.kinds`. It says how its plans are written (`Grammar`), what
their parameter is, and how likely they reject and accept at given parameters. Abilities that only some
kinds have (p-values, stages, a smallest plan) are small protocols in `steelyard.core.abilities`;
a question that needs one refuses in one sentence where a kind lacks it.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from importlib import import_module
from typing import Any, TypeVar

import numpy as np

from steelyard.core.errors import InvalidValue, NoAnswer
from steelyard.core.numbers import write_number
from steelyard.core.parameter import Columns, Floats, Parameter
from steelyard.core.plan import Claim, Plan, Reject, split_claim

REQUIRED = object()


@dataclass(frozen=True, slots=True)
class Field:
    """One field of a plan's text, such as ``n 50`` or ``planning-sigma 0.4``.

    Parameters
    ----------
    word : str
        The word that starts the field; the design's attribute has ``_`` for ``-``.
    read : callable
        Turns the text after the word, or a number, into a value; raises `InvalidValue`.
    write : callable
        Turns a value into text.
    default : object
        Value of a missing field, which is then not written; `REQUIRED` if it must be there.
    """

    word: str
    read: Callable[[Any, str], Any]
    write: Callable[[Any], str] = write_number
    default: Any = None

    @property
    def attribute(self) -> str:
        """Name of the value in the design."""
        return self.word.replace("-", "_")

    @property
    def required(self) -> bool:
        """Whether a plan must have the field."""
        return self.default is REQUIRED


@dataclass(frozen=True, slots=True)
class Wording:
    """How people speak of a kind's plans.

    Parameters
    ----------
    title : str
        What lists call the kind, e.g. ``"defectives among items"``.
    sample : str
        The instruction at the bench; ``{n}`` and other fields of the design are filled in.
    found : str
        What the statistic counts or measures, after a value, e.g. ``"defectives"``.
    assumptions : tuple of str
        What must hold for the probabilities to be true; each can be ticked.
    """

    title: str
    sample: str
    found: str
    assumptions: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Grammar:
    """How the plans of a kind are written.

    Parameters
    ----------
    kind : str
        The kind's name, unique: ``Plan.kind``.
    head : str
        The words that open the text; several kinds may share a head.
    marker : str
        The field that tells this kind from others with the same head.
    design : type
        Frozen dataclass of the design; checks itself when made.
    fields : tuple of Field
        The design's fields.
    order : tuple of str
        Canonical order of all fields, common ones (claim, alpha, split, verdict) included.
    rules : tuple of str
        The fields that together make the rule, e.g. ``("reject",)``.
    read_rule, write_rule : callable
        From those fields' texts (dict) and the design to the rule, and back.
    wording : Wording
        How people speak of these plans.
    extent : str
        The field that says how much is inspected.
    extra : str
        The field, if any, that must be known beside it: the lot, or sigma.
    least : int
        The least amount that a plan can inspect.
    base : str
        The kind that this one is a form of, with further fields such as ``misses``.
    """

    kind: str
    head: str
    marker: str
    design: Callable[..., Any]
    fields: tuple[Field, ...]
    order: tuple[str, ...]
    rules: tuple[str, ...]
    read_rule: Callable[[dict[str, str], Any], Any]
    write_rule: Callable[[Any], dict[str, str]]
    wording: Wording
    extent: str = "n"
    extra: str = ""
    least: int = 1
    base: str = ""


class Kind(ABC):
    """A kind of plan: everything the questions need to know of it."""

    grammar: Grammar
    parameters: tuple[Parameter, ...]

    @abstractmethod
    def columns(self, plans: Sequence[Plan]) -> Columns:
        """Return the plans as a struct of arrays, each of shape ``(len(plans),)``."""

    @abstractmethod
    def reject(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the probability that each plan rejects its claim; columns and rates broadcast."""

    @abstractmethod
    def accept(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the probability of not rejecting, accurate where it is small."""

    def passing(self, columns: Columns, *rates: Floats) -> Floats:
        """Return the probability that the lot passes: the verdict decides which of the two it is."""
        demonstrates = columns["pass"]
        if not demonstrates.any():
            return self.accept(columns, *rates)
        if demonstrates.all():
            return self.reject(columns, *rates)
        return np.where(demonstrates, self.reject(columns, *rates), self.accept(columns, *rates))

    def read_claim(self, text: str, design: Any) -> Claim:
        """Return the claim that a text such as ``p<=0.02`` makes on this kind's parameter.

        Raises
        ------
        InvalidValue
            When the text has another form, another symbol or a value out of range.
        """
        symbol, relation, value = split_claim(text)
        parameter = self.parameters[0]
        if symbol.lower() not in (parameter.symbol.lower(), *parameter.aliases):
            raise InvalidValue("claim", f"be about {parameter.symbol} ({parameter.name})", text)
        return Claim(parameter.symbol, relation, parameter.claimed(value, relation, design))

    def rises(self, plan: Plan) -> bool:
        """Tell whether the power of a one-sided plan rises with the parameter."""
        if plan.claim is not None and plan.claim.side != "either":
            return bool(plan.claim.side == "above")
        return bool(plan.rule.high is not None)

    def takes(self, plan: Plan) -> tuple[int, int]:
        """Return how many parameters a question gives at least and at most; a plan may know its sigma."""
        del plan
        return sum(not parameter.optional for parameter in self.parameters), len(self.parameters)

    def check_rates(self, *rates: float) -> None:
        """Raise when the values of several parameters do not go together."""
        del rates

    def region(self, plan: Plan) -> str:
        """Return what rejects the claim, with mathematical signs."""
        texts = self.grammar.write_rule(plan.rule)
        parts = texts.values() if len(texts) == 1 else [f"{word} {text}" for word, text in texts.items()]
        return "; ".join(parts).replace("<=", " ≤ ").replace(">=", " ≥ ")

    def told(self, plan: Plan) -> str:
        """Return in words what rejects the claim."""
        return self.region(plan)

    def critical_value(self, plan: Plan) -> float:
        """Return the one number that decides; here there is none, unless the rule is a `Reject`."""
        message = f"a plan of kind {plan.kind} has no single critical value; see SY_REGION"
        raise NoAnswer(message)

    def given_rule(self, rule: Reject) -> Any:
        """Return a rule of this kind from critical values given from outside."""
        message = (
            f"a rule for a plan of kind {self.grammar.kind} is no pair of critical values: type its plan text"
        )
        raise NoAnswer(message)

    def check_claim(self, claim: Claim, design: Any) -> None:
        """Raise when the claim is true whatever the parameter, such as ``p<=1``."""
        least, most = self.parameters[0].reach(design)
        always = claim.value >= most if claim.relation == "<=" else claim.value <= least
        if always and claim.relation != "=":
            raise InvalidValue("claim", f"be false for some {claim.symbol}", str(claim))

    def verify(self, plan: Plan) -> None:  # noqa: B027 - most kinds have nothing to verify
        """Raise when design, claim and rule do not go together."""

    def size(self, plan: Plan) -> float:
        """Return the largest power over the claim; here power is monotone, so at its boundary.

        Raises
        ------
        InvalidValue
            When the plan has no claim.
        """
        return float(self.reject(self.columns([plan]), np.array([claim_of(plan).value]))[0])

    def algebra(self, plan: Plan) -> str | None:
        """Return the power function as algebra, or None where there is none."""
        del plan
        return None

    def native(self, plan: Plan, cell: str) -> str | None:
        """Return a formula of the spreadsheet's own functions for the power at `cell`, or None."""
        del plan, cell
        return None


def claim_of(plan: Plan) -> Any:
    """Return the plan's claim; refuse with one sentence where a rule came without."""
    if plan.claim is None:
        raise InvalidValue("claim", "be written in the plan for this question", None, "e.g. claim p<=0.02")
    return plan.claim


KINDS: dict[str, Kind] = {}
AnyKind = TypeVar("AnyKind", bound=Kind)


def register(kind: AnyKind) -> AnyKind:
    """Add a kind to the register; its name must be new."""
    name = kind.grammar.kind
    if name in KINDS:
        raise InvalidValue("kind", "be registered once", name)
    KINDS[name] = kind
    return kind


def kind_of(plan: Plan) -> Kind:
    """Return the kind that a plan is of."""
    return KINDS[plan.kind]


def known_kinds() -> dict[str, Kind]:
    """Return every kind by its name; the first call registers those of the package."""
    import_module("steelyard.core.kinds")
    return KINDS


def heads() -> dict[str, tuple[Kind, ...]]:
    """Return the kinds by the words that open their text."""
    return _heads(tuple(known_kinds().values()))


@lru_cache(maxsize=4)
def _heads(kinds: tuple[Kind, ...]) -> dict[str, tuple[Kind, ...]]:
    found: dict[str, tuple[Kind, ...]] = {}
    for kind in kinds:
        found[kind.grammar.head] = (*found.get(kind.grammar.head, ()), kind)
    return found


@lru_cache(maxsize=256)
def words_of(kinds: tuple[Kind, ...]) -> tuple[str, ...]:
    """Return the field words of several kinds, each once, in order."""
    return tuple(dict.fromkeys(word for kind in kinds for word in kind.grammar.order))
