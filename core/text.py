"""Plans as one readable line of text: reading and writing.

Fields may stand in any order after the kind, case and spaces are free, the decimal mark is a point.
The canonical order is written back; writing then reading gives an equal plan.
"""

from __future__ import annotations

from collections.abc import Sequence
from difflib import get_close_matches
from functools import lru_cache
from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.kind import Grammar, Kind, heads, kind_of, words_of
from steelyard.core.numbers import read_choice, read_probability, write_number
from steelyard.core.plan import SPLITS, VERDICTS, Plan

LONGEST = 255
MOST_GROWTH = 4  # of a text that is written back: 1e15 becomes 1000000000000000


def read_plan(text: str) -> Plan:
    """Return the plan that a line of text describes.

    Raises
    ------
    InvalidValue
        Naming the field and what is allowed: unknown kind, unknown or doubled field, a value out of
        range, a rule that can never or always reject.

    Examples
    --------
    >>> plan = read_plan("Binomial | claim p<=2% | n 50 | reject x>=4")
    >>> write_plan(plan)
    'binomial | n 50 | claim p<=0.02 | reject x>=4'
    """
    text = str(text)
    opening, *segments = [" ".join(part.split()) for part in text.split("|")]
    candidates, words = _candidates(opening)
    for segment in segments:
        word, _, rest = segment.partition(" ")
        _store(words, word, rest, candidates)
    kind = _choose(candidates, tuple(words))
    plan = _assemble(kind.grammar, kind, words)
    kind.verify(plan)
    if len(text) * MOST_GROWTH > LONGEST and len(write_plan(plan)) > LONGEST:
        raise InvalidValue("plan text", f"be at most {LONGEST} characters long", text)
    return plan


def write_plan(plan: Plan) -> str:
    """Return a plan's canonical text.

    Examples
    --------
    >>> write_plan(read_plan("binomial | n 59 | claim p>=5% | reject x<=0 | alpha 5% | verdict pass"))
    'binomial | n 59 | claim p>=0.05 | alpha 0.05 | reject x<=0 | verdict pass'
    """
    grammar = kind_of(plan).grammar
    texts = dict(grammar.write_rule(plan.rule))
    for field in grammar.fields:
        value = getattr(plan.design, field.attribute)
        if value != field.default:
            texts[field.word] = field.write(value)
    if plan.claim is not None:
        texts["claim"] = str(plan.claim)
    if plan.alpha is not None:
        texts["alpha"] = write_number(plan.alpha)
    if plan.split != "half":
        texts["split"] = plan.split
    if plan.verdict != "fail":
        texts["verdict"] = plan.verdict
    opening = f"{grammar.head} {texts.pop(grammar.head)}" if grammar.head in texts else grammar.head
    return " | ".join([opening, *(f"{word} {texts[word]}" for word in grammar.order if word in texts)])


def _candidates(opening: str) -> tuple[tuple[Kind, ...], dict[str, str]]:
    """Find the kinds that the first segment may open; ``until 3 defectives`` is head and field in one."""
    known, wanted = heads(), " ".join(opening.lower().split())
    if wanted in known:
        return known[wanted], {}
    head, _, rest = wanted.partition(" ")
    if head in known and any(head == field.word for kind in known[head] for field in kind.grammar.fields):
        return known[head], {head: rest}
    close = get_close_matches(wanted, known, n=1)
    hint = f"did you mean {close[0]}?" if close else ""
    raise InvalidValue("kind", f"be one of {', '.join(known)}", opening, hint)


def _store(words: dict[str, str], word: str, rest: str, candidates: tuple[Kind, ...]) -> None:
    known, word = words_of(candidates), word.lower()
    for name in _phrases(known).get(word, ()):
        if f"{word} {rest}".lower().startswith(name + " "):
            word, rest = name, f"{word} {rest}"[len(name) :]
    if word not in known:
        close = get_close_matches(word, known, n=1)
        hint = f"did you mean {close[0]}?" if close else ""
        raise InvalidValue("field", f"be one of {', '.join(known)}", word, hint)
    if word in words:
        raise InvalidValue(word, "be written once", f"{word} {words[word]} and {word} {rest.strip()}")
    if not rest.strip():
        raise InvalidValue(word, "have a value", None)
    words[word] = rest.strip()


@lru_cache(maxsize=256)
def _phrases(known: tuple[str, ...]) -> dict[str, tuple[str, ...]]:
    """Return by their first word the fields of several, such as ``at end`` in "at end accept x<=3"."""
    found: dict[str, tuple[str, ...]] = {}
    for name in known:
        first, _, others = name.partition(" ")
        if others:
            found[first] = (*found.get(first, ()), name)
    return found


@lru_cache(maxsize=1024)
def _choose(candidates: tuple[Kind, ...], words: tuple[str, ...]) -> Kind:
    """Return the kind whose fields cover the words and whose marker is among them."""
    covering = [kind for kind in candidates if _fields(kind).issuperset(words)] or candidates
    fitting = [kind for kind in covering if kind.grammar.marker in words] or covering
    if len(fitting) > 1:
        return _foremost(fitting, candidates, words)
    for word in words:
        if word not in _fields(fitting[0]):
            raise InvalidValue("field", f"be one of {', '.join(fitting[0].grammar.order)}", word)
    return fitting[0]


def _fields(kind: Kind) -> set[str]:
    return {*kind.grammar.order, kind.grammar.head}


def _foremost(fitting: Sequence[Kind], candidates: tuple[Kind, ...], words: tuple[str, ...]) -> Kind:
    """Return the one kind of several that is no form of another, or say what tells them apart."""
    bases = {kind.grammar.base or kind.grammar.kind for kind in fitting}
    plain = [kind for kind in candidates if kind.grammar.kind in bases]
    markers = dict.fromkeys(kind.grammar.marker for kind in plain)
    written = [word for word in markers if word in words]
    forms = dict.fromkeys(kind.grammar.marker for kind in fitting if kind.grammar.base)
    added = [word for word in forms if word in words]
    if len(plain) == 1 and not added:
        return plain[0]
    if len(written) + len(added) < 2:
        raise InvalidValue("plan", f"say {' or '.join(markers)}", None)
    # No kind has all the fields: two kinds of plan in one, or two forms, or a form that this kind has not.
    clash = next((found for found in (written, added) if len(found) > 1), written + added)
    raise InvalidValue("plan", f"have only one of {' and '.join(clash)}", "all of them")


def _assemble(grammar: Grammar, kind: Kind, words: dict[str, str]) -> Plan:
    values: dict[str, Any] = {}
    for field in grammar.fields:
        if field.word in words:
            values[field.attribute] = field.read(words[field.word], field.word)
        elif field.required:
            raise InvalidValue(field.word, "be written in the plan", None)
        else:
            values[field.attribute] = field.default
    design = grammar.design(**values)
    rule = grammar.read_rule({word: words[word] for word in grammar.rules if word in words}, design)
    return Plan(
        kind=grammar.kind,
        design=design,
        rule=rule,
        claim=kind.read_claim(words["claim"], design) if "claim" in words else None,
        alpha=read_probability(words["alpha"], "alpha") if "alpha" in words else None,
        split=read_choice(words.get("split", SPLITS[0]), "split", SPLITS),
        verdict=read_choice(words.get("verdict", VERDICTS[0]), "verdict", VERDICTS),
    )
