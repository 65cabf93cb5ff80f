"""Rates at which a tail of a count law has a given probability, to about nine digits.

They start the refinement of `steelyard.core.limits`, which does not depend on their last digits.
"""

from __future__ import annotations

from scipy import special  # noqa: TID251 - the inverses belong to the tails


def binomial_rate(x: float, n: float, end: str, prob: float) -> float:
    """Return the rate p with P(X >= x) = prob (``"high"``) or P(X <= x) = prob (``"low"``).

    Examples
    --------
    >>> round(binomial_rate(0, 59, "low", 0.05), 6)
    0.049508
    """
    if end == "high":
        return float(special.betaincinv(x, n - x + 1.0, prob))
    return float(special.betainccinv(x + 1.0, n - x, prob))


def poisson_mean(x: float, end: str, prob: float) -> float:
    """Return the mean with P(X >= x) = prob (``"high"``) or P(X <= x) = prob (``"low"``).

    Examples
    --------
    >>> round(poisson_mean(0, "low", 0.05), 6)
    2.995732
    """
    if end == "high":
        return float(special.gammaincinv(x, prob))
    return float(special.gammainccinv(x + 1.0, prob))
