"""Columns of formulas made of several answers of our functions, with their values."""

from __future__ import annotations

from typing import Any

from steelyard.workbooks.terms import Terms, ask, literal

AGREES, DIFFERS, NONE = "agrees", "differs", "none"

_CHANCES = {"p95": 0.95, "p50": 0.5, "p10": 0.1, "p05": 0.05}


def critical(host: str, plans: Terms, sides: Terms, end: str) -> Terms:
    """Return critical counts: nothing where the side has no such end, a word where that end is empty."""
    missing = {"lower": "above", "upper": "below"}[end]
    found = ask(host, "CRITICAL", plans, literal(end))
    texts, cells = [], []
    rows = zip(found.texts, found.values(), sides.texts, sides.values(), strict=True)
    for text, value, side, named in rows:
        texts.append(f'IF({side}="{missing}","",IF(ISTEXT({text}),"{NONE}",{text}))')
        cells.append([None if named == missing else NONE if isinstance(value, str) else value])
    return Terms(tuple(texts), cells)


def passing(host: str, chance: str, plans: Terms, verdicts: Terms, sides: Terms) -> Terms:
    """Return the true values that pass with a chance, ``"p95"`` to ``"p05"``.

    In a demonstration, passing is rejecting the claim.
    """
    probability = _CHANCES[chance]
    power = either(verdicts, "pass", probability, round(1 - probability, 2))
    return ask(host, "RATE_FOR", plans, power, either(sides, "below", "lower", "upper"))


def either(given: Terms, word: str, yes: Any, no: Any) -> Terms:
    """Return one of two constants in each row, as a cell says."""
    written = [literal(value).texts[0] for value in (yes, no)]
    texts = tuple(f'IF({text}="{word}",{written[0]},{written[1]})' for text in given.texts)
    return Terms(texts, [[yes if value == word else no] for value in given.values()])


def least(first: Terms, second: Terms) -> Terms:
    """Return the lesser of two powers, or the first where there is no second."""
    texts, cells = [], []
    for row, (one, other) in enumerate(zip(first.values(), second.values(), strict=True)):
        single = other is None
        texts.append(first.texts[row] if single else f"MIN({first.texts[row]},{second.texts[row]})")
        cells.append([one if single else min(one, other)])
    return Terms(tuple(texts), cells)


def shortfall(power: Terms, wanted: Terms, fixed: Terms) -> Terms:
    """Return by how much the power falls short of the one wanted, where the size was given."""
    texts, cells = [], []
    for row, (have, want, size) in enumerate(
        zip(power.values(), wanted.values(), fixed.values(), strict=True)
    ):
        a, b, c = power.texts[row], wanted.texts[row], fixed.texts[row]
        texts.append(f'IF(OR({a}="",{b}="",{c}=""),"",MAX(0,{b}-{a}))')
        known = isinstance(have, float) and None not in (want, size)
        cells.append([max(0.0, want - have) if known else None])
    return Terms(tuple(texts), cells)


def agreement(ours: Terms, theirs: Terms, allowed: float) -> Terms:
    """Return whether two numbers agree to a relative difference; nothing where one is a text."""
    bound = literal(allowed).texts[0]
    texts, cells = [], []
    for a, b, one, other in zip(ours.texts, theirs.texts, ours.values(), theirs.values(), strict=True):
        near = f"ABS({a}-{b})<={bound}*MAX(ABS({a}),1E-290)"
        texts.append(f'IF(OR(ISTEXT({a}),ISTEXT({b})),"",IF({near},"{AGREES}","{DIFFERS}"))')
        known = isinstance(one, float) and isinstance(other, float)
        fits = known and abs(one - other) <= allowed * max(abs(one), 1e-290)
        cells.append([(AGREES if fits else DIFFERS) if known else None])
    return Terms(tuple(texts), cells)
