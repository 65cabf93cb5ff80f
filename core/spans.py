"""The sample sizes that go with a critical count.

A plan rejects from `k` events on. Growing the sample makes `k` events more likely, under the lower rate and
under the higher one. So the sizes at which `k` keeps both risks form an interval, its *span*: it opens where
the higher rate yields `k` events often enough, and closes where the lower rate yields them too often. Both
ends grow with `k`; that is all the search for the smallest plan needs.

A plan that rejects low counts has the same spans. It rejects up to ``k - 1``; what was its size limits the
opening, what was its power limits the closing.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from steelyard.core.law import CountLaw
from steelyard.core.parameter import Columns, Floats
from steelyard.core.splits import Truth, compare, doubt

Rows = NDArray[np.intp]

_PATIENCE = 6  # Newton steps before every second step halves the bracket
_MOST_STEPS = 2.0**52  # beyond, a float has no neighbour one step away
_TINY, _RARE = 1e-300, 1e-200


@dataclass(frozen=True, slots=True)
class Risk:
    """Bounds on a tail: each broken by small samples and kept by all larger ones, or the reverse.

    Parameters
    ----------
    law : CountLaw
    columns : dict of ndarray
        The designs' fields except the amount, each of shape ``(risks,)``.
    end : {"high", "low"}
        The tail: at least `k` events, or fewer than `k`.
    rate : ndarray of float
        The rate at which the tail is taken, of the same shape.
    bound : ndarray of float
        What the tail is compared with, of the same shape.
    closing : ndarray of bool
        False: the first size is sought that keeps the bound; True: the last. Of the same shape.
    step : ndarray of float
        Amount of one step of the search, of the same shape: 1 for whole sizes.
    """

    law: CountLaw
    columns: Columns
    end: str
    rate: Floats
    bound: Floats
    closing: Truth
    step: Floats

    def turn(self, rows: Rows, count: Floats) -> Floats:
        """Return where bounds turn, in steps.

        Parameters
        ----------
        rows : ndarray of int
            Which risks.
        count : ndarray of float
            The critical count `k` of each, at least 1.

        Returns
        -------
        ndarray of float
            Opening: the first size that keeps the bound, or one more than the largest size allowed.
            Closing: the last size that keeps it, at most the largest size allowed.
        """
        part = self._rows(rows)
        largest = np.minimum(np.floor(part.law.largest(part.columns) / part.step), _MOST_STEPS)
        return _first_size(part, count, largest) - part.closing

    def _rows(self, rows: Rows) -> Risk:
        columns = {name: column[rows] for name, column in self.columns.items()}
        rate, bound, step = self.rate[rows], self.bound[rows], self.step[rows]
        return Risk(self.law, columns, self.end, rate, bound, self.closing[rows], step)

    def passed(self, size: Floats, count: Floats) -> tuple[Truth, Floats]:
        """Tell which sizes lie at or beyond the turn, and return the tails there."""
        columns = {**self.columns, self.law.amount: size * self.step}
        tail = (
            self.law.at_least(count, columns, self.rate)
            if self.end == "high"
            else self.law.at_most(count - 1, columns, self.rate)
        )
        sign = np.sign(tail - self.bound)
        # Between whole sizes there are no ties that matter: any real size will do there, to 12 digits.
        near = np.flatnonzero((np.abs(tail - self.bound) <= doubt(self.bound)) & (self.step == 1))
        if near.size:
            sign[near] = self._rows(near)._exact_sign(size[near], count[near])
        risen = sign if self.end == "high" else -sign
        return np.where(self.closing, risen > 0, risen >= 0), tail

    def _exact_sign(self, size: Floats, count: Floats) -> NDArray[Any]:
        columns = {**self.columns, self.law.amount: size * self.step}
        x = count if self.end == "high" else count - 1
        return compare(self.law, columns, self.rate, [(1, self.end, x)], self.bound)

    def newton(self, size: Floats, count: Floats, tail: Floats, passed: Truth) -> Floats:
        """Return the size that Newton's method proposes, on the logarithm of the tail or its complement."""
        columns = {**self.columns, self.law.amount: size * self.step}
        pace = self.law.pace(count - 1, columns, self.rate)
        speed = pace * self.step * self.law.exactly(count - 1, columns, self.rate)
        speed = speed if self.end == "high" else -speed
        small = self.bound <= 0.5
        now = np.maximum(np.where(small, tail, 1.0 - tail), _TINY)
        aim = np.where(small, self.bound, 1.0 - self.bound)
        speed = np.where(small, speed, -speed)
        still = np.abs(speed) < _TINY
        move = np.log(aim / now) * now / np.where(still, 1.0, speed)
        return np.ceil(size + np.where(still, np.where(passed, -np.inf, np.inf), move))


def _first_size(risk: Risk, count: Floats, largest: Floats) -> Floats:
    """Return the first size at or beyond the turn: Newton's method inside a bracket that never lets go."""
    bounded = np.isfinite(risk.law.most({risk.law.amount: largest}))
    beyond = np.array(np.broadcast_to(largest + 1, count.shape))
    before = np.minimum(np.where(bounded, count - 1, 0.0), largest)
    size, tail, passed = _guess(risk, count, bounded), np.zeros(count.shape), np.zeros(count.shape, bool)
    found, rows, rounds = beyond.copy(), np.arange(count.size), 0
    while True:
        found[rows] = beyond
        still = np.flatnonzero(beyond - before > 1)
        if not still.size:
            return found
        if still.size < rows.size:
            rows, risk = rows[still], risk._rows(still)
            parts = (count, size, tail, passed, before, beyond)
            count, size, tail, passed, before, beyond = (part[still] for part in parts)
        if rounds > _PATIENCE and rounds % 2:
            size = np.floor((before + beyond) / 2)
        elif rounds:
            size = risk.newton(size, count, tail, passed)
        size = np.clip(size, before + 1, beyond - 1)
        passed, tail = risk.passed(size, count)
        before, beyond = np.where(passed, before, size), np.where(passed, size, beyond)
        rounds += 1


def _guess(risk: Risk, count: Floats, bounded: Truth) -> Floats:
    """Return about where the turn is: Wilson and Hilferty's gamma quantile, as a size.

    For items that count at most once, W. C. Guenther's correction is applied (J. Qual. Technology 1,
    1969, from memory).
    """
    level = risk.bound if risk.end == "high" else 1.0 - risk.bound
    root = 1.0 - 1.0 / (9.0 * count) + _normal_quantile(level) / (3.0 * np.sqrt(count))
    mean = count * np.maximum(root, 0.05) ** 3
    share = np.maximum(risk.law.share(risk.columns, risk.rate), _RARE)
    amount = mean / share - np.where(bounded, (mean - count + 1.0) / 2.0, 0.0)
    size: Floats = np.ceil(amount / risk.step)
    return size


def _normal_quantile(level: Floats) -> Floats:
    """Return the normal quantile to about three digits (Abramowitz and Stegun, 26.2.23, from memory)."""
    tail = np.clip(np.minimum(level, 1.0 - level), _TINY, 0.5)
    t = np.sqrt(-2.0 * np.log(tail))
    above = 1.0 + t * (1.432788 + t * (0.189269 + t * 0.001308))
    z: Floats = t - (2.515517 + t * (0.802853 + t * 0.010328)) / above
    return np.where(level < 0.5, -z, z)
