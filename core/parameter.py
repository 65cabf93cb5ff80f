"""The parameter that a claim is about: its symbol, unit, and which values it may take."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from steelyard.core.errors import InvalidValue
from steelyard.core.numbers import read_number

Floats = NDArray[np.float64]
Columns = dict[str, NDArray[Any]]


@dataclass(frozen=True, slots=True)
class Parameter:
    """A parameter of a kind of plan.

    Parameters
    ----------
    symbol : str
        How plan text writes it, e.g. ``"p"``.
    name : str
        What labels and messages call it, e.g. ``"defect rate"``.
    unit : str
        Its unit in words, e.g. ``"proportion between 0 and 1"``.
    lower, upper : float
        The closed range of values; an infinite end is open.
    lower_open : bool
        Whether `lower` itself is no possible value (a standard deviation of 0).
    aliases : tuple of str
        Other symbols that a claim may be written with, in lower case.
    optional : bool
        Whether a question may leave it out (a sigma that the plan already knows).
    whole : bool
        Whether only whole numbers are possible.
    """

    symbol: str
    name: str
    unit: str
    lower: float
    upper: float
    lower_open: bool = False
    aliases: tuple[str, ...] = ()
    optional: bool = False
    whole: bool = False

    def read(self, value: Any, design: Any = None) -> float:
        """Return one value of the parameter from a number or text.

        Parameters
        ----------
        value : float, int or str
            As typed, ``"2%"`` included.
        design : object, optional
            The plan's design; parameters of finite lots need it.

        Raises
        ------
        InvalidValue
            When the value is no number or outside the parameter's range.
        """
        number = read_number(value, self.symbol)
        if not self.allowed(number):
            raise InvalidValue(self.symbol, self.rule(), value)
        return number

    def claimed(self, value: Any, relation: str, design: Any = None) -> float:
        """Return a claim's boundary; finite lots round a proportion to the claim's own side."""
        del relation
        return self.read(value, design)

    def allowed(self, values: Any) -> Any:
        """Return a mask of the values that lie in the parameter's range."""
        above = values > self.lower if self.lower_open else values >= self.lower
        return above & (values <= self.upper) & (abs(values) < np.inf)

    def convert(self, values: Floats, columns: Columns) -> Floats:
        """Return queried values in the parameter's own unit, NaN where they are refused."""
        del columns
        return values if self.allowed(values).all() else np.where(self.allowed(values), values, np.nan)

    def span(self, columns: Columns) -> tuple[Floats, Floats]:
        """Return the least and the greatest value for each plan, either of which may be infinite."""
        del columns
        return np.asarray(self.lower), np.asarray(self.upper)

    def show(self, value: float, bare: bool = False) -> str:
        """Return a value as sentences show it, with its name unless `bare`."""
        if self.upper == 1.0:
            return show_rate(value)
        return f"{value:.6g}" if bare else f"{value:.6g} {self.name}"

    def reach(self, design: Any) -> tuple[float, float]:
        """Return the least and the greatest value for one design."""
        del design
        return self.lower, self.upper

    def rule(self) -> str:
        """Return what a value must do, for messages."""
        if math.isfinite(self.lower) and math.isfinite(self.upper):
            return f"lie between {self.lower:g} and {self.upper:g}"
        if math.isfinite(self.lower):
            return f"be greater than {self.lower:g}" if self.lower_open else f"be at least {self.lower:g}"
        return "be a finite number"


def show_rate(value: float) -> str:
    """Return a proportion as people read it: percent, or ppm where it is small.

    Examples
    --------
    >>> show_rate(0.02), show_rate(0.00005), show_rate(0.017762)
    ('2 %', '50 ppm', '1.776 %')
    """
    return f"{value * 1e6:.4g} ppm" if 0 < value < 0.0005 else f"{value * 100:.4g} %"
