"""Imperfect inspection: some defectives are missed, some good items are condemned.

Rates, claims and alpha keep their meaning: they are about what is true. What is *found* follows another law.
A process shows the same kind of count at another rate; a finite lot does not, because the good items of the
sample take part in it (see `steelyard.core.kinds.inspected`).

Misses are the share of defectives that inspection does not find. False alarms are the share of good items
that it condemns; where defects are counted, the false finds per unit.
"""

from __future__ import annotations

import dataclasses
import re
from collections.abc import Callable, Mapping
from fractions import Fraction
from typing import Any

import numpy as np

from steelyard.core.algebra import LONGEST
from steelyard.core.errors import InvalidValue
from steelyard.core.forms import form_of
from steelyard.core.kind import REQUIRED, Field, Grammar
from steelyard.core.law import CountLaw, ExactLaw, RateLaw
from steelyard.core.native import operand
from steelyard.core.numbers import read_number, typed, write_number
from steelyard.core.parameter import Columns, Floats
from steelyard.core.plan import Reject

Found = Callable[[Any, Any, Any], Any]

KNOWN_ERRORS = "Misses and false alarms are known, alike for every item, and independent from item to item."
FIELDS = (Field("misses", read_number, default=REQUIRED), Field("false-alarms", read_number, default=0.0))


def found_per_item(rate: Any, misses: Any, false_alarms: Any) -> Any:
    """Return the share of items found defective where the share `rate` is; floats, arrays or fractions.

    Examples
    --------
    >>> round(found_per_item(0.02, 0.1, 0.01), 6)
    0.0278
    """
    return rate * (1 - misses) + (1 - rate) * false_alarms


def found_per_unit(rate: Any, misses: Any, false_alarms: Any) -> Any:
    """Return the finds per unit where there are `rate` defects per unit."""
    return rate * (1 - misses) + false_alarms


def true_rate(found: Found, rate: float, misses: float, false_alarms: float) -> float:
    """Return the true rate at which `rate` is found; below 0 where even false alarms alone yield more.

    Examples
    --------
    >>> true_rate(found_per_item, 0.0278, 0.1, 0.01)
    0.02
    """
    none, slope = line_of(found, misses, false_alarms)
    return float((typed(rate) - none) / slope)


def line_of(found: Found, misses: float, false_alarms: float) -> tuple[Fraction, Fraction]:
    """Return what is found at the true rate 0, and how much more for each unit of the true rate."""
    errors = typed(misses), typed(false_alarms)
    none = found(Fraction(0), *errors)
    return none, found(Fraction(1), *errors) - none


def check_shares(misses: float, false_alarms: float) -> None:
    """Refuse shares of missed and of falsely condemned items with which finding tells nothing of the truth.

    Raises
    ------
    InvalidValue
        When one of them is no share below 1, or they add up to 1 or more.
    """
    check_misses(misses)
    if not 0 <= false_alarms < 1:
        raise InvalidValue("false-alarms", "be at least 0 and less than 1", false_alarms)
    both = typed(misses) + typed(false_alarms)
    if both >= 1:
        raise InvalidValue("misses and false-alarms", "add up to less than 1", float(both))


def check_misses(misses: float) -> None:
    """Refuse misses that are no share below 1."""
    if not 0 <= misses < 1:
        raise InvalidValue("misses", "be at least 0 and less than 1", misses)


class InspectedLaw(CountLaw):
    """The law of what is found, asked at the true rate.

    Parameters
    ----------
    law : RateLaw
        The law of a count that is found without errors.
    found : callable
        From the true rate, misses and false alarms to the rate at which `law` holds: a straight line.
    symbol : str
        How `law` writes its rate.
    """

    def __init__(self, law: RateLaw, found: Found, symbol: str) -> None:
        self.law, self.found, self.symbol = law, found, symbol
        self.statistic, self.amount, self.divisible = law.statistic, law.amount, law.divisible

    def _found(self, columns: Columns, rate: Floats) -> Floats:
        found: Floats = self.found(rate, columns["misses"], columns["false_alarms"])
        return found

    def at_most(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance that at most `x` are found."""
        return self.law.at_most(x, columns, self._found(columns, rates[0]))

    def at_least(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance that at least `x` are found."""
        return self.law.at_least(x, columns, self._found(columns, rates[0]))

    def exactly(self, x: Any, columns: Columns, *rates: Floats) -> Floats:
        """Return the chance that `x` are found."""
        return self.law.exactly(x, columns, self._found(columns, rates[0]))

    def exact(self, row: Mapping[str, Any], rate: Fraction) -> ExactLaw:
        """Return the exact law, its rate found in fractions."""
        errors = (typed(row[name]) for name in ("misses", "false_alarms"))
        return self.law.exact(row, self.found(rate, *errors))

    def largest(self, columns: Columns) -> Any:
        """Return the most that a plan may inspect."""
        return self.law.largest(columns)

    def share(self, columns: Columns, rate: Floats) -> Floats:
        """Return the expected finds per unit of the amount."""
        return self.law.share(columns, self._found(columns, rate))

    def divergence(self, share: Floats, expected: Floats) -> Floats:
        """Return Chernoff's exponent."""
        return self.law.divergence(share, expected)

    def most(self, columns: Columns) -> Any:
        """Return the most that can be found."""
        return self.law.most(columns)

    def algebra(self, design: Any, rule: Reject) -> str | None:
        """Return the power as a function of the finds' rate f, and this as one of the true rate."""
        power = self.law.algebra(design, rule)
        if power is None:
            return None
        line = " + ".join(self._line(design))
        power = re.sub(r"\b" + self.symbol + r"\b", "f", power)
        text = f"{power}, with f = {line} {self.symbol}"
        return text if len(text) <= LONGEST else None

    def native(self, design: Any, rule: Reject, cell: str) -> str | None:
        """Return the formula of a perfect inspection, at the rate that is found."""
        return self.law.native(design, rule, self.line(design, cell))

    def line(self, design: Any, cell: str) -> str:
        """Return the rate that is found as a formula of the true rate in a cell."""
        return f"{'+'.join(self._line(design))}*{operand(cell)}"

    def _line(self, design: Any) -> list[str]:
        """Return what is found at the rate 0, if anything, and the slope."""
        parts = line_of(self.found, design.misses, design.false_alarms)
        return [write_number(float(part)) for part in parts if part]

    def limit(self, row: Mapping[str, Any], x: float, end: str, miss: float, split: str) -> float:
        """Return the limit of what is found, traced back to the true rate and clipped to its range."""
        found = self.law.limit(row, x, end, miss, split)
        if np.isinf(found):
            return found
        true = true_rate(self.found, found, float(row["misses"]), float(row["false_alarms"]))
        return min(max(true, 0.0), self.law.greatest_rate)


def inspected_grammar(grammar: Grammar, design: Callable[..., Any], errors: str) -> Grammar:
    """Return a grammar with the fields ``misses`` and ``false-alarms``.

    Parameters
    ----------
    grammar : Grammar
        Of the same plans without errors; its last assumption says that there are none.
    design : type
        The design with both numbers.
    errors : str
        A sentence about them at the bench, with ``{misses}`` and ``{false_alarms}``.
    """
    wording = dataclasses.replace(
        grammar.wording,
        title=f"{grammar.wording.title}, with misses and false alarms",
        sample=f"{grammar.wording.sample} {errors}",
        found=f"found {grammar.wording.found}",
        assumptions=(*grammar.wording.assumptions[:-1], KNOWN_ERRORS),
    )
    return form_of(grammar, "inspected", design, FIELDS, wording)
