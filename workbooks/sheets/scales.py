"""Round true values for tables and axes: from where, to where, in which steps."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from steelyard.workbooks.charts import Axis, step
from steelyard.workbooks.plans import Planned

_NICE = (1, 1.5, 2, 2.5, 3, 4, 5, 10)


@dataclass(frozen=True, slots=True)
class Scale:
    """The true values that matter to a plan.

    Parameters
    ----------
    low, high : float
        What a table or chart should cover.
    lower, upper : float
        What the parameter can be.
    whole : bool
        Whether it is a whole number.
    open : bool
        Whether `lower` itself is impossible.
    """

    low: float
    high: float
    lower: float
    upper: float
    whole: bool
    open: bool = False

    def values(self, parts: int) -> list[float]:
        """Return round values from `low` to `high`: about `parts` steps, at most one more.

        Examples
        --------
        >>> Scale(0, 0.11, 0, 1, whole=False).values(8)
        [0.0, 0.015, 0.03, 0.045, 0.06, 0.075, 0.09, 0.105, 0.12]
        """
        size = nice((self.high - self.low) / parts)
        size = float(math.ceil(size)) if self.whole else size
        first, last = math.floor(self.low / size + 1e-9), math.ceil(self.high / size - 1e-9)
        values = [clean(size * number) for number in range(first, last + 1)]
        return [value for value in values if self.lower + self.open * size / 2 <= value <= self.upper]


def marks(planned: Planned) -> list[float]:
    """Return the claim's boundary and the rates to catch, in the parameter's own unit."""
    assert planned.plan.claim is not None
    return [planned.plan.claim.value, *planned.own_catches]


def scale_of(planned: Planned, beyond: float) -> Scale:
    """Return the scale of one plan: from the parameter's end to `beyond` times the largest mark.

    A parameter without a lower end, such as a mean, is shown around its marks.
    """
    parameter, marked = planned.kind.parameters[0], marks(planned)
    whole = planned.kind.grammar.extra == "lot"
    lower, upper = (0.0, float(planned.extra or 0)) if whole else (parameter.lower, parameter.upper)
    if math.isfinite(lower):
        wanted = beyond * max(marked) or (1.0 if whole else 0.1)
        return Scale(lower, min(wanted, upper), lower, upper, whole, parameter.lower_open)
    margin = 0.75 * (max(marked) - min(marked) or abs(marked[0]) / 10 or 1.0)
    return Scale(min(marked) - margin, max(marked) + margin, lower, upper, whole)


def common(scales: Sequence[Scale]) -> Scale:
    """Return the scale that covers several, where all of them are possible."""
    lower, upper = max(scale.lower for scale in scales), min(scale.upper for scale in scales)
    low, high = min(scale.low for scale in scales), max(scale.high for scale in scales)
    return Scale(max(low, lower), min(high, upper), lower, upper, scales[0].whole, scales[0].open)


def table_values(planned: Planned, count: int) -> list[float]:
    """Return at most `count` true values for the table of one plan, its marks among them."""
    scale, marked = scale_of(planned, 1.5), set(marks(planned))
    tried = (set(scale.values(parts)) | marked for parts in range(count, 0, -1))
    found = next(values for values in tried if len(values) <= count)
    while len(found) < count and (more := _middle(sorted(found), scale.whole)) not in found:
        found.add(more)
    return sorted(found)


def _middle(values: Sequence[float], whole: bool) -> float:
    """Return the middle of the widest gap."""
    gap = max(range(len(values) - 1), key=lambda place: clean(values[place + 1] - values[place]))
    middle = (values[gap] + values[gap + 1]) / 2
    return float(math.floor(middle)) if whole else float(f"{middle:.6g}")


def check_values(planned: Planned) -> list[float]:
    """Return five true values to check a plan at: around its claim and what it must catch."""
    scale, (claim, *catches) = scale_of(planned, 1.5), marks(planned)
    far = catches[-1] if catches else scale.high
    wanted = [(scale.low + claim) / 2, claim, (claim + far) / 2, far, scale.high]
    return [float(round(value)) if scale.whole else float(f"{value:.6g}") for value in wanted]


def nice(size: float) -> float:
    """Return the next round number: 1, 1.5, 2, 2.5, 3, 4 or 5 times a power of ten.

    Examples
    --------
    >>> nice(0.0163), nice(0.25), nice(21)
    (0.02, 0.25, 25.0)
    """
    power = 10.0 ** math.floor(math.log10(size))
    factor = next(factor for factor in _NICE if factor * power >= size * (1 - 1e-9))
    return clean(factor * power)


def clean(value: float) -> float:
    """Return a float without the dust of arithmetic.

    Examples
    --------
    >>> clean(3 * 0.1)
    0.3
    """
    return float(f"{value:.12g}")


def rate_axis(title: str, low: float, high: float, percent: bool) -> Axis:
    """Return the axis of true values; in percent it has as many decimals as its labels need.

    Examples
    --------
    >>> rate_axis("true defect rate, p", 0, 0.04, percent=True).digits
    '0.0%'
    """
    unit = step(low, high)
    if low:  # labels at multiples of the unit
        low, high = clean(unit * math.floor(low / unit)), clean(unit * math.ceil(high / unit))
    decimals = max(0, -math.floor(math.log10(100 * unit)))
    digits = f"0{'.' if decimals else ''}{'0' * decimals}%"
    return Axis(title, high=high, low=low, digits=digits if percent else "General")
