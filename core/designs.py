"""Kinds and designs from what people type: a kind's name, and its numbers by name."""

from __future__ import annotations

from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.kind import Kind, known_kinds
from steelyard.core.numbers import read_choice


def kind_named(name: str) -> Kind:
    """Return a kind by its name.

    Raises
    ------
    InvalidValue
        With the list of kinds, and a suggestion where one comes close.
    """
    kinds = known_kinds()
    return kinds[read_choice(name, "kind", tuple(kinds))]


def design_from(kind: Kind, values: dict[str, Any]) -> Any:
    """Return a kind's design from named values, as cells give them.

    Raises
    ------
    InvalidValue
        When a value is missing, not needed, or refused.
    """
    fields = {field.attribute: field for field in kind.grammar.fields}
    for name, value in values.items():
        if name not in fields and value is not None:
            raise InvalidValue(name, f"be left out for a plan of kind {kind.grammar.kind}", value)
    read = {}
    for name, field in fields.items():
        value = values.get(name)
        if value is not None:
            read[name] = field.read(value, field.word)
        elif field.required:
            raise InvalidValue(field.word, f"be given for a plan of kind {kind.grammar.kind}", None)
        else:
            read[name] = field.default
    return kind.grammar.design(**read)


def extent_values(kind: Kind, extent: Any, extra: Any) -> dict[str, Any]:
    """Return the design's values from a sample size and the one other number that a kind may need."""
    grammar = kind.grammar
    values = {grammar.extent: extent}
    if grammar.extra:
        values[grammar.extra] = extra
    elif extra is not None:
        raise InvalidValue("lot or sigma", f"be left out for a plan of kind {grammar.kind}", extra)
    return values
