"""How the inspection of a lot ends, and after how much."""

from __future__ import annotations

from dataclasses import dataclass

from steelyard.core.parameter import Floats


@dataclass(frozen=True, slots=True)
class Endings:
    """The ways in which a plan may end, and their chances at several rates.

    Parameters
    ----------
    amounts : ndarray of float, shape (ways,)
        How much has been inspected, in items or units.
    accepted, rejected : ndarray of float, shape (ways, rates)
        The chance that the lot passes, or fails, after just so much. Where inspection stops early inside a
        part, a failure counts at the part's end.
    average : ndarray of float, shape (rates,)
        The expected amount inspected: the average sample number.
    """

    amounts: Floats
    accepted: Floats
    rejected: Floats
    average: Floats

    def total(self, lot: float) -> Floats:
        """Return the expected amount inspected if every lot that fails is inspected whole."""
        total: Floats = (self.amounts[:, None] * self.accepted + lot * self.rejected).sum(axis=0)
        return total
