"""How a test of a count weighs its evidence: the p-value as a sum of tails, compared with alpha exactly.

A p-value is a weighted sum of tails of the law at the claim's boundary. With F = P(X <= x),
S = P(X >= x) and f = P(X = x), a low count has the evidence

- one-sided: F;
- split ``half``: 2 F;
- split ``nearest``: 2 F - f, which is P(X <= x) + P(X <= x - 1);
- split ``rarest``: F + P(X >= y) for the first y beyond x with f(y) <= f(x);

a high count the same, mirrored. The p-value of a two-sided test is the smaller of the two, at most 1.

Ties: a count whose p-value equals alpha is rejected, counts of equal probability go together. Floats
decide unless they lie within `NEAR` of each other; then the law decides in exact arithmetic on the
decimals as typed.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from steelyard.core.numbers import typed
from steelyard.core.parameter import Columns, Floats

if TYPE_CHECKING:
    from steelyard.core.law import CountLaw, ExactLaw

Tail = tuple[Any, str, Floats]
Truth = NDArray[np.bool_]

NEAR = 1e-8  # relative; wider than a tail's error, because a rate near 1 leaves few digits of 1 - rate
_FEW, _AT_ONCE = 4, 32
_ROUNDING = 1e-11  # relative; ten times a tail's error
ONE_SIDED = "one-sided"
ENDS = {"above": ("high",), "below": ("low",), "either": ("low", "high")}
FALLING_ENDS = {"above": ("low",), "below": ("high",), "either": ("low", "high")}  # of a count that falls


def critical_high(law: CountLaw, columns: Columns, rate: Any, alpha: Any, split: str = ONE_SIDED) -> Floats:
    """Return the least count that rejects at the high end, for many designs at once.

    Parameters
    ----------
    law : CountLaw
    columns : dict of ndarray
        The designs' fields, e.g. ``{"n": np.array([50.0, 125.0])}``; they broadcast with `rate`.
    rate : float or ndarray
        The claim's boundary.
    alpha : float or ndarray
        Nominal significance level.
    split : {"one-sided", "half", "nearest", "rarest"}
        How a two-sided test shares alpha; ``"one-sided"`` gives this end all of it.

    Returns
    -------
    ndarray of float
        Whole numbers; NaN where no possible count is rejected.

    Examples
    --------
    >>> from steelyard.core.kinds.binomial import BINOMIAL
    >>> critical_high(BINOMIAL.law, {"n": np.array([1.0, 50.0, 125.0])}, 0.02, 0.05).tolist()
    [1.0, 4.0, 6.0]
    """
    rate = np.asarray(rate, dtype=float)

    def rejects(x: Floats) -> Truth:
        return within(law, columns, rate, tails_of(law, columns, rate, x, "high", split), alpha)

    most = law.most(columns)
    # A share of alpha rejects no more than all of it, so the search starts where that ends.
    start = np.zeros(()) if split == ONE_SIDED else critical_high(law, columns, rate, alpha)
    high = first_whole(rejects, np.where(np.isnan(start), most + 1, start))
    return np.where(high <= most, high, np.nan)


def critical_low(law: CountLaw, columns: Columns, rate: Any, alpha: Any, split: str = ONE_SIDED) -> Floats:
    """Return the greatest count that rejects at the low end, for many designs at once.

    Parameters and shape are those of `critical_high`.

    Examples
    --------
    >>> from steelyard.core.kinds.binomial import BINOMIAL
    >>> critical_low(BINOMIAL.law, {"n": np.array([58.0, 59.0])}, 0.05, 0.05).tolist()
    [nan, 0.0]
    """
    rate = np.asarray(rate, dtype=float)

    def rejects(x: Floats) -> Truth:
        return within(law, columns, rate, tails_of(law, columns, rate, x, "low", split), alpha)

    if split == ONE_SIDED:
        low = first_whole(lambda x: ~rejects(x), np.zeros(())) - 1
    else:
        low = first_whole(rejects, np.nan_to_num(critical_low(law, columns, rate, alpha), nan=-1.0), -1.0)
    return np.where(low >= 0, low, np.nan)


def p_value(law: CountLaw, columns: Columns, rate: Floats, x: Floats, side: str, split: str) -> Floats:
    """Return the p-values of counts: the smallest evidence of the ends that the side looks at.

    Parameters
    ----------
    law, columns, rate, x : see `tails_of`
    side : {"above", "below", "either"}
        Where the true rate lies when the claim is false.
    split : {"half", "nearest", "rarest"}
        How the two ends share alpha; without meaning for one end.
    """
    split = split if side == "either" else ONE_SIDED
    found = [weigh(law, columns, rate, tails_of(law, columns, rate, x, end, split)) for end in ENDS[side]]
    smallest: Floats = np.minimum.reduce(found)
    return smallest


def tails_of(law: CountLaw, columns: Columns, rate: Floats, x: Floats, end: str, split: str) -> list[Tail]:
    """Return the tails whose weighted sum is the evidence of the counts `x` at one end.

    Parameters
    ----------
    law : CountLaw
    columns : dict of ndarray
        The designs' fields; they broadcast with `rate` and `x`.
    rate : ndarray of float
        The claim's boundary.
    x : ndarray of float
        Whole counts.
    end : {"low", "high"}
    split : {"one-sided", "half", "nearest", "rarest"}

    Returns
    -------
    list of (weight, end, counts)
    """
    outwards, other = (1.0, "low") if end == "high" else (-1.0, "high")
    if split == "half":
        return [(2, end, x)]
    if split == "nearest":
        return [(1, end, x), (1, end, x + outwards)]
    if split == "rarest":
        chance = law.exactly(x, columns, rate)
        # An impossible count has no part of the other tail.
        return [(1, end, x), (np.sign(chance), other, opposite(law, columns, rate, x, -outwards))]
    return [(1, end, x)]


def weigh(law: CountLaw, columns: Columns, rate: Floats, tails: list[Tail]) -> Floats:
    """Return the weighted sum of tails, at most 1."""
    sides = {"low": law.at_most, "high": law.at_least}
    parts = [weight * sides[end](x, columns, rate) for weight, end, x in tails]
    total: Floats = np.minimum(sum(parts[1:], parts[0]), 1.0)
    return total


def within(law: CountLaw, columns: Columns, rate: Floats, tails: list[Tail], alpha: Any) -> Truth:
    """Tell where a weighted sum of tails is at most alpha; a tie, decided exactly, counts as within."""
    return compare(law, columns, rate, tails, alpha) <= 0


def compare(law: CountLaw, columns: Columns, rate: Floats, tails: list[Tail], bound: Any) -> NDArray[Any]:
    """Return the sign of a weighted sum of tails minus a bound, number or array; ties are decided exactly."""
    total, ends = weigh(law, columns, rate, tails), [end for _, end, _ in tails]

    def settle(exact: ExactLaw, bound: Any, *numbers: Any) -> int:
        weights, counts = numbers[: len(ends)], numbers[len(ends) :]
        return exact.compare(list(zip(map(int, weights), ends, map(int, counts), strict=True)), typed(bound))

    numbers = [bound, *(weight for weight, _, _ in tails), *(x for _, _, x in tails)]
    close = np.abs(total - bound) <= doubt(bound)
    return _settle(law, columns, rate, np.sign(total - bound), close, settle, numbers)


def doubt(bound: Any) -> Any:
    """Return how close to a bound floats do not decide: relative to the bound or what it leaves to 1."""
    return NEAR * np.minimum(bound, 1 - bound) + _ROUNDING * bound


def first_whole(predicate: Callable[[Floats], Truth], start: Floats, step: float = 1.0) -> Floats:
    """Return the first of ``start, start + step, start + 2 step …`` where a monotone predicate is true.

    Parameters
    ----------
    predicate : callable
        From whole numbers to booleans of the same shape; false, then true, and true somewhere.
    start : ndarray of float
        Where to begin; the answer's shape is that of ``predicate(start)``.
    step : {1.0, -1.0}
        The direction.
    """
    found = predicate(start)
    ahead = np.array(np.broadcast_to(start, found.shape), dtype=float)
    behind, stride = ahead - step, step
    if found.size <= _FEW and not found.all():  # then many numbers in one call are faster than few calls
        run = ahead + step * np.arange(1.0, _AT_ONCE).reshape(-1, *[1] * ahead.ndim)
        true = predicate(run)
        hit = true.any(axis=0)
        first = np.where(hit, np.take_along_axis(run, true.argmax(axis=0)[np.newaxis], 0)[0], run[-1] + step)
        ahead, behind = np.where(found, ahead, first), np.where(found, behind, first - step)
        found = found | hit
        if not found.all():
            found = predicate(ahead)
    while not found.all():
        behind, stride = np.where(found, behind, ahead), 2 * stride
        ahead = np.where(found, ahead, ahead + stride)
        found = predicate(ahead)
    while (np.abs(ahead - behind) > 1).any():
        middle = np.trunc((ahead + behind) / 2)
        true = predicate(middle)
        ahead, behind = np.where(true, middle, ahead), np.where(true, behind, middle)
    return ahead


def opposite(law: CountLaw, columns: Columns, rate: Floats, x: Floats, step: float) -> Floats:
    """Return the first count beyond `x`, across the mode, that is not more probable than `x`.

    Equal probabilities are found equal exactly. Impossible counts, such as -1, are less probable.
    """
    chance = law.exactly(x, columns, rate)

    def settle(exact: ExactLaw, y: Any, x: Any) -> bool:
        return exact.compare_counts(int(y), int(x)) <= 0

    def rarer(y: Floats) -> Truth:
        other = law.exactly(y, columns, rate)
        close = (np.abs(other - chance) <= NEAR * chance) & (chance > 0)
        return _settle(law, columns, rate, other <= chance, close, settle, [y, x])

    return first_whole(rarer, x + step, step)


def _settle(
    law: CountLaw,
    columns: Columns,
    rate: Floats,
    answer: NDArray[Any],
    close: Truth,
    question: Callable[..., Any],
    numbers: list[Any],
) -> NDArray[Any]:
    """Replace the answers that floats cannot give by those of the exact law."""
    if not close.any():
        return answer
    answer = np.array(answer)
    fields = {name: np.broadcast_to(column, answer.shape) for name, column in columns.items()}
    spread = [np.broadcast_to(number, answer.shape) for number in (rate, *numbers)]
    for place in map(tuple, np.argwhere(close)):
        row: Mapping[str, Any] = {name: field[place] for name, field in fields.items()}
        at, *values = (part[place] for part in spread)
        answer[place] = question(law.exact(row, typed(at)), *values)
    return answer
