"""Uncertain rates: what is known of a rate beforehand, and what it forecasts for samples.

Each law of counts has a family of priors that stays one after inspection: after `count` defectives in an
`amount`, beta(a, b) has become beta(a + count, b + amount - count), gamma(a, b) gamma(a + count, b + amount).
So the next part of a sample has a known law, whatever was found before.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import Any

from steelyard.core import tails_clustered, tails_prior
from steelyard.core.parameter import Floats


@dataclass(frozen=True, slots=True)
class Prior(ABC):
    """What is known of a rate.

    Parameters
    ----------
    a, b : float
        Both positive. The mean is ``a / (a + b)`` for a proportion, ``a / b`` for defects per unit.
    """

    a: float
    b: float

    @abstractmethod
    def exactly(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return the chance that the next `step` shows `more`, after `count` in an `amount`."""

    @abstractmethod
    def at_most(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return the chance that it shows at most so many."""

    @abstractmethod
    def at_least(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return the chance that it shows at least so many."""

    @abstractmethod
    def below(self, rate: float, amount: Any, count: Any) -> Floats:
        """Return the chance that the parameter is below `rate`, after `count` in an `amount`."""

    @abstractmethod
    def above(self, rate: float, amount: Any, count: Any) -> Floats:
        """Return the chance that the parameter is above `rate`."""

    def equal(self, rate: float) -> float:
        """Return the chance, beforehand, that the parameter is just `rate`: none, if it is continuous."""
        del rate
        return 0.0


class BetaPrior(Prior):
    """A beta law of the defect rate of items."""

    __slots__ = ()

    def exactly(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return beta-binomial chances."""
        return tails_prior.beta_binomial_pmf(more, step, *self._after(amount, count))

    def at_most(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return lower beta-binomial tails."""
        return tails_prior.beta_binomial_at_most(more, step, *self._after(amount, count))

    def at_least(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return upper beta-binomial tails."""
        return tails_prior.beta_binomial_at_least(more, step, *self._after(amount, count))

    def below(self, rate: float, amount: Any, count: Any) -> Floats:
        """Return a lower tail of the beta law."""
        return tails_prior.beta_at_most(rate, *self._after(amount, count))

    def above(self, rate: float, amount: Any, count: Any) -> Floats:
        """Return an upper tail of the beta law."""
        return tails_prior.beta_at_least(rate, *self._after(amount, count))

    def _after(self, amount: Any, count: Any) -> tuple[Any, Any]:
        return self.a + count, self.b + (amount - count)


@dataclass(frozen=True, slots=True)
class LotPrior(BetaPrior):
    """A beta-binomial law of the defectives in a lot: the lot comes from a process with a beta prior."""

    lot: float

    def below(self, rate: float, amount: Any, count: Any) -> Floats:
        """Return the chance of fewer than `rate` defectives, those found included."""
        return tails_prior.beta_binomial_at_most(
            rate - 1 - count, self.lot - amount, *self._after(amount, count)
        )

    def above(self, rate: float, amount: Any, count: Any) -> Floats:
        """Return the chance of more than `rate` defectives, those found included."""
        return tails_prior.beta_binomial_at_least(
            rate + 1 - count, self.lot - amount, *self._after(amount, count)
        )

    def equal(self, rate: float) -> float:
        """Return the chance of just so many defectives."""
        return float(tails_prior.beta_binomial_pmf(rate, self.lot, self.a, self.b))


class GammaPrior(Prior):
    """A gamma law of the defects per unit."""

    __slots__ = ()

    def exactly(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return negative binomial chances."""
        return tails_clustered.negative_binomial_pmf(more, *self._forecast(step, amount, count))

    def at_most(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return lower negative binomial tails."""
        return tails_clustered.negative_binomial_at_most(more, *self._forecast(step, amount, count))

    def at_least(self, more: Any, step: Any, amount: Any, count: Any) -> Floats:
        """Return upper negative binomial tails."""
        return tails_clustered.negative_binomial_at_least(more, *self._forecast(step, amount, count))

    def below(self, rate: float, amount: Any, count: Any) -> Floats:
        """Return a lower tail of the gamma law."""
        return tails_prior.gamma_at_most(rate, self.a + count, self.b + amount)

    def above(self, rate: float, amount: Any, count: Any) -> Floats:
        """Return an upper tail of the gamma law."""
        return tails_prior.gamma_at_least(rate, self.a + count, self.b + amount)

    def _forecast(self, step: Any, amount: Any, count: Any) -> tuple[Any, Any]:
        """Return the mean of the next defects, and by how much their variance exceeds it."""
        excess = step / (self.b + amount)
        return (self.a + count) * excess, excess
