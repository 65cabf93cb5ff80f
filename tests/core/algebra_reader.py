"""A reader of the algebra that power functions are written in: evaluates it, exactly where it is rational."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import mpmath

_TOKEN = re.compile(r"\s*(?:(\d+(?:\.\d+)?(?:e[+-]?\d+)?)|([A-Za-z]+)|(\.\.|\S))")


def evaluate(text: str, **values: Any) -> Any:
    """Return the value of an expression; names without a value are unknown.

    Products stand side by side and bind closer than division, as people read them: ``a b/c`` is ``(a b)/c``,
    which is the same as reading from left to right.
    """
    tokens = [match for match in _TOKEN.findall(text) if any(match)]
    reader = _Reader([number or name or sign for number, name, sign in tokens], values)
    value = reader.sum()
    assert reader.at == len(reader.tokens), f"left over: {reader.tokens[reader.at :]}"
    return value


def choose(n: Any, k: Any) -> Fraction:
    """Return the binomial coefficient, 0 where k exceeds n."""
    assert n == int(n) >= 0 and k == int(k) >= 0
    return Fraction(math.comb(int(n), int(k)))


class _Reader:
    def __init__(self, tokens: list[str], values: Mapping[str, Any]) -> None:
        self.tokens, self.values, self.at = tokens, dict(values), 0

    def peek(self) -> str:
        return self.tokens[self.at] if self.at < len(self.tokens) else ""

    def take(self, expected: str = "") -> str:
        token = self.peek()
        assert token and expected in ("", token), f"{expected or 'more'} expected, found {token!r}"
        self.at += 1
        return token

    def sum(self) -> Any:
        value = self.product()
        while self.peek() in ("+", "-"):
            value = value + self.product() if self.take() == "+" else value - self.product()
        return value

    def product(self) -> Any:
        if self.peek() == "-":
            self.take()
            return -self.product()
        value = self.power()
        while (token := self.peek()) and token not in ("+", "-", ")", ",", "=", ".."):
            if token == "/":
                self.take()
                value = value / self.power()
            else:
                value = value * self.power()
        return value

    def power(self) -> Any:
        value = self.factorial()
        if self.peek() == "^":
            self.take()
            value = value ** int(self.factorial())
        return value

    def factorial(self) -> Any:
        value = self.atom()
        if self.peek() == "!":
            self.take()
            value = Fraction(math.factorial(int(value)))
        return value

    def atom(self) -> Any:
        token = self.take()
        if token[0].isdigit():
            return Fraction(token)
        if token == "(":
            value = self.sum()
            self.take(")")
            return value
        if token in ("C", "exp", "sum"):
            self.take("(")
            value = getattr(self, f"_{token.lower()}")()
            self.take(")")
            return value
        return self.values[token]

    def _c(self) -> Any:
        n = self.sum()
        self.take(",")
        return choose(n, self.sum())

    def _exp(self) -> Any:
        value = self.sum()
        exact = mpmath.mpf(value.numerator) / value.denominator if isinstance(value, Fraction) else value
        return mpmath.exp(exact)

    def _sum(self) -> Any:
        start = self.at
        total: Any = Fraction(0)
        self.values["k"] = Fraction(1)
        self.sum()  # a first reading finds the limits
        for sign in (",", "k", "="):
            self.take(sign)
        first = int(self.sum())
        self.take("..")
        last = int(self.sum())
        end = self.at
        for k in range(first, last + 1):
            self.at, self.values["k"] = start, Fraction(k)
            total = total + self.sum()
        self.at = end
        return total
