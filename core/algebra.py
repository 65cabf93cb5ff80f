"""Power functions as algebra, with exact whole-number coefficients.

A power is a sum of the probabilities of the counts that reject, or 1 minus the sum of all others, whichever
is shorter. Where the terms would not fit into a cell, the sum is written as ``sum(..., k=0..30)``.

Products are written side by side. ``C(a,b)`` is the binomial coefficient, 0 where b exceeds a.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from math import comb, factorial

from steelyard.core.numbers import write_number
from steelyard.core.plan import Reject

LONGEST = 255
_MOST_TERMS = 40  # more can't fit, whatever they are

Frame = Callable[[Sequence[str], bool], str]
Runs = list[tuple[int, int]]


def binomial_power(n: int, rule: Reject) -> str:
    """Return the power as a function of p, for the defectives among n items.

    Examples
    --------
    >>> binomial_power(13, Reject(None, 2))
    '1 - (1-p)^13 - 13 p (1-p)^12'
    >>> binomial_power(80, Reject(30, 50))
    '1 - sum(C(80,k) p^k (1-p)^(80-k), k=31..49)'
    """

    def term(k: int) -> str:
        return _product(_factor(comb(n, k)), _power("p", k), _power("(1-p)", n - k))

    def frame(parts: Sequence[str], others: bool) -> str:
        return " - ".join(["1", *parts]) if others else " + ".join(parts)

    return _shortest(rule, n, term, f"C({n},k) p^k (1-p)^({n}-k)", frame)


def poisson_power(units: float, rule: Reject) -> str:
    """Return the power as a function of the rate, for the defects found in some units.

    Examples
    --------
    >>> poisson_power(120, Reject(None, 3))
    '1 - exp(-120 rate) (1 + 120 rate + (120 rate)^2/2)'
    """
    mean = _product(_factor(units), "rate")
    base = mean if units == 1 else f"({mean})"

    def term(k: int) -> str:
        if k < 2:
            return mean if k else "1"
        return f"{base}^{k}/{factorial(k)}"

    def frame(parts: Sequence[str], others: bool) -> str:
        inner = parts[0] if len(parts) == 1 else f"({' + '.join(parts)})"
        chance = _product(f"exp(-{mean})", "" if inner == "1" else inner)
        return f"1 - {chance}" if others else chance

    return _shortest(rule, None, term, f"{base}^k/k!", frame)


def lot_power(lot: int, n: int, rule: Reject) -> str:
    """Return the power as a function of D, for the defectives among n items from a lot.

    Examples
    --------
    >>> lot_power(60, 32, Reject(None, 1))
    '1 - C(60-D,32)/C(60,32)'
    >>> lot_power(800, 50, Reject(None, 3))
    '1 - (C(800-D,50) + D C(800-D,49) + C(D,2) C(800-D,48))/C(800,50)'
    """

    def term(k: int) -> str:
        return _product(_choose("D", k), _choose(f"{lot}-D", n - k)) or "1"

    def frame(parts: Sequence[str], others: bool) -> str:
        inner = parts[0] if len(parts) == 1 else f"({' + '.join(parts)})"
        return f"{'1 - ' if others else ''}{inner}/C({lot},{n})"

    return _shortest(rule, n, term, f"C(D,k) C({lot}-D,{n}-k)", frame)


def _shortest(rule: Reject, most: int | None, term: Callable[[int], str], summand: str, frame: Frame) -> str:
    """Return the shortest form: spelled out where that fits, else with sums.

    Parameters
    ----------
    rule : Reject
    most : int or None
        The greatest count; None where there is none.
    term : callable
        From a count to its probability, up to what `frame` adds.
    summand : str
        The same for a count k.
    frame : callable
        From the terms, and whether they are those of the other counts, to the power.
    """
    low, high = (None if end is None else int(end) for end in (rule.low, rule.high))
    forms: list[tuple[Runs, bool]] = []
    if high is None or most is not None:
        ends = [(0, low), (high, most)]
        forms.append(
            ([(first, last) for first, last in ends if first is not None and last is not None], False)
        )
    if high is not None or most is not None:
        forms.append(([(0 if low is None else low + 1, (most or 0) if high is None else high - 1)], True))
    spelled = [
        frame([term(k) for first, last in runs for k in range(first, last + 1)], others)
        for runs, others in forms
        if sum(last - first + 1 for first, last in runs) <= _MOST_TERMS
    ]
    fitting = [text for text in spelled if len(text) <= LONGEST]
    sums = [
        frame([f"sum({summand}, k={first}..{last})" for first, last in runs], others)
        for runs, others in forms
    ]
    return min(fitting or sums, key=len)


def _product(*factors: str) -> str:
    return " ".join(factor for factor in factors if factor)


def _factor(number: float) -> str:
    return "" if number == 1 else write_number(number) if isinstance(number, float) else str(number)


def _power(base: str, exponent: int) -> str:
    if exponent < 2:
        return base if exponent else ""
    return f"{base}^{exponent}"


def _choose(what: str, k: int) -> str:
    """Return a binomial coefficient; nothing where it is 1."""
    if k < 2:
        return (what if what.isalpha() else f"({what})") if k else ""
    return f"C({what},{k})"
