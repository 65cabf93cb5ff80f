"""Limits that measurements must keep: design and rule of a plan, as text too, and what a sample says."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from steelyard.core.errors import InvalidValue
from steelyard.core.measured import MOST_MEASURED
from steelyard.core.numbers import read_number, write_number
from steelyard.core.observed import Sample
from steelyard.core.plan import Plan
from steelyard.core.quality import Index
from steelyard.core.tails_continuous import beta_at_most, normal_at_least

UNKNOWN = "unknown"
MOST_SIGMAS = 1e9  # between two limits; wider ones are no limits at all
SIDES = {"upper": "upper-mean", "lower": "mean-lower"}


@dataclass(frozen=True, slots=True)
class Limits:
    """`n` items measured against one limit or two; `sigma` is a number, or ``"unknown"``.

    A plan for one limit may leave its value open.
    """

    n: int
    lower: float | None = None
    upper: float | None = None
    sigma: float | str | None = UNKNOWN

    def __post_init__(self) -> None:
        if self.sigma is None:
            object.__setattr__(self, "sigma", UNKNOWN)
        least = 2 if self.deviation is None else 1
        if not least <= self.n <= MOST_MEASURED:
            raise InvalidValue("n", f"be a whole number from {least} to {MOST_MEASURED}", self.n)
        if self.deviation is not None and self.deviation <= 0:
            raise InvalidValue("sigma", "be greater than 0, or unknown", self.sigma)
        if self.lower is not None and self.upper is not None and self.lower >= self.upper:
            raise InvalidValue("upper", f"be greater than the lower limit {self.lower:g}", self.upper)
        if self.lower is not None and self.upper is not None and self.deviation is not None:
            self._check_width(self.upper - self.lower, self.deviation)

    def _check_width(self, width: float, deviation: float) -> None:
        if width > MOST_SIGMAS * deviation:
            raise InvalidValue(
                "sigma", f"be at least {width / MOST_SIGMAS:g} for limits so far apart", deviation
            )

    @property
    def deviation(self) -> float | None:
        """The known sigma, or None."""
        return self.sigma if isinstance(self.sigma, int | float) else None

    @property
    def sides(self) -> tuple[str, ...]:
        """The limits that have a value."""
        return tuple(side for side in SIDES if getattr(self, side) is not None)

    @property
    def index(self) -> Index:
        """What its quality index follows."""
        two, deviation = self.lower is not None and self.upper is not None, self.deviation
        if not two or deviation is None:
            return Index(two, deviation is not None)
        assert self.upper is not None
        assert self.lower is not None
        return Index(two, True, (self.upper - self.lower) / deviation)


@dataclass(frozen=True, slots=True)
class Accept:
    """The lot passes when the index of every one of its `sides` is at least `k`.

    Parameters
    ----------
    sides : tuple of {"upper", "lower"}
    scale : {"s", "sigma"}
        What the distance from a limit is measured in.
    k : float
    """

    sides: tuple[str, ...]
    scale: str
    k: float

    def parts(self) -> list[str]:
        """Return the indices as plan text writes them."""
        return [f"({SIDES[side]})/{self.scale}" for side in self.sides]


def read_sigma(value: Any, name: str) -> float | str:
    """Return a known sigma, or ``"unknown"``."""
    if isinstance(value, str) and value.strip().lower() == UNKNOWN:
        return UNKNOWN
    return read_number(value, name)


def write_sigma(sigma: float | str) -> str:
    """Return a sigma as plan text writes it."""
    return sigma if isinstance(sigma, str) else write_number(sigma)


def read_accept(texts: dict[str, str], design: Limits) -> Accept:
    """Return the rule of a text such as ``(upper-mean)/s>=1.926 and (mean-lower)/s>=1.926``.

    Raises
    ------
    InvalidValue
        When the text has another form, or a k for each limit.
    """
    scale = "s" if design.deviation is None else "sigma"
    known = {f"({part})/{scale}": side for side, part in SIDES.items()}
    text, found = texts.get("accept"), {}
    for part in ("" if text is None else text.lower().replace("≥", ">=")).split(" and "):
        index, _, number = part.replace(" ", "").partition(">=")
        if index not in known or known[index] in found or not number:
            raise InvalidValue("accept", f"have the form {_form(known, design.sides)}", text)
        found[known[index]] = read_number(number, "accept")
    if len(set(found.values())) > 1:
        raise InvalidValue("accept", "have one k for both limits", text)
    return Accept(tuple(side for side in SIDES if side in found), scale, next(iter(found.values())))


def _form(known: dict[str, str], sides: tuple[str, ...]) -> str:
    return " and ".join(f"{index}>=1.926" for index, side in known.items() if side in (sides or ("upper",)))


def write_accept(rule: Accept) -> dict[str, str]:
    """Return a rule as plan text writes it."""
    return {"accept": " and ".join(f"{part}>={write_number(rule.k)}" for part in rule.parts())}


def distances(plan: Plan, sample: Sample) -> list[float]:
    """Return how many standard deviations the mean is inside each limit."""
    signs = {"upper": 1.0, "lower": -1.0}
    for side in plan.rule.sides:
        if getattr(plan.design, side) is None:
            raise InvalidValue(side, "be written in the plan for this question", None, f"e.g. {side} 10.5")
    return [signs[side] * (getattr(plan.design, side) - sample.mean) / sample.s for side in plan.rule.sides]


def quality_index(plan: Plan, sample: Sample) -> float:
    """Return the least of the indices: the one that decides."""
    return min(distances(plan, sample))


def fraction_beyond(n: int, distance: float, known: bool) -> float:
    """Return the estimated fraction beyond a limit: unbiased, with the least variance.

    Parameters
    ----------
    n : int
    distance : float
        How many standard deviations the mean is inside the limit.
    known : bool
        Whether these are known ones; otherwise those of the sample.

    Notes
    -----
    Lieberman and Resnikoff 1955, from memory: a beta probability; with sigma known a normal one.

    Examples
    --------
    >>> round(fraction_beyond(20, 1.926, False), 6)
    0.022351
    """
    if n < (2 if known else 3):
        raise InvalidValue("n", f"be at least {2 if known else 3} to estimate a fraction", n)
    if known:
        return float(normal_at_least(distance * math.sqrt(n / (n - 1))))
    return float(beta_at_most(0.5 - distance * math.sqrt(n) / (2 * (n - 1)), n / 2 - 1))
