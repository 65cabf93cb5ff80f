"""The definitions of p-values and regions, taken literally in exact arithmetic on every count."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction


@dataclass(frozen=True)
class Brute:
    """A law as whole-number weights of the counts 0, 1, 2 …, and the least and greatest value of their sum.

    Only a Poisson law, which has no end, has a sum that is not known exactly.
    """

    weights: list[int]
    total: tuple[Fraction, Fraction]

    def evidence(self, x: int, side: str, split: str) -> Iterator[tuple[int, int]]:
        """Yield pairs (a, b): the p-value is the least ``a / total + b``, or 1."""
        low, high = sum(self.weights[: x + 1]), sum(self.weights[:x])
        if side == "above":
            yield -high, 1
        elif side == "below":
            yield low, 0
        elif split == "half":
            yield 2 * low, 0
            yield -2 * high, 2
        elif split == "nearest":
            yield 2 * low - self.weights[x], 0
            yield -2 * high - self.weights[x], 2
        else:
            yield -sum(weight for weight in self.weights if weight > self.weights[x]), 1

    def at_most(self, x: int, side: str, split: str, alpha: Fraction) -> bool:
        """Tell whether the p-value is at most alpha."""
        answers = [
            any(a <= (alpha - b) * total for a, b in self.evidence(x, side, split)) for total in self.total
        ]
        assert len(set(answers)) == 1, "the enclosure is too wide"
        return answers[0]

    def p_value(self, x: int, side: str, split: str) -> Fraction:
        """Return the p-value, exact unless the sum of the weights is not known exactly."""
        return min(Fraction(1), *(a / self.total[0] + b for a, b in self.evidence(x, side, split)))


def binomial(n: int, p: Fraction) -> Brute:
    """Return the binomial law."""
    a, b = p.numerator, p.denominator
    weights = [math.comb(n, x) * a**x * (b - a) ** (n - x) for x in range(n + 1)]
    return Brute(weights, (Fraction(b**n),) * 2)


def hypergeometric(lot: int, defectives: int, n: int) -> Brute:
    """Return the hypergeometric law."""
    weights = [math.comb(defectives, x) * math.comb(lot - defectives, n - x) for x in range(n + 1)]
    return Brute(weights, (Fraction(math.comb(lot, n)),) * 2)


def poisson(mean: Fraction, top: int) -> Brute:
    """Return the Poisson law up to `top`; what lies beyond is less than twice the next weight."""
    assert top > 2 * mean
    a, b = mean.numerator, mean.denominator
    factorial = math.factorial(top + 1) * b ** (top + 1)
    weights = [factorial // (math.factorial(x) * b**x) * a**x for x in range(top + 2)]
    inside = sum(weights[:-1])
    return Brute(weights[:-1], (Fraction(inside), Fraction(inside + 2 * weights[-1])))
