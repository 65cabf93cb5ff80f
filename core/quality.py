"""What a plan by measurement needs to know of its quality index: chances at the split that counts, k and n.

There are four cases: one limit or two, sigma known or unknown; see `steelyard.core.quality_index` and
`steelyard.core.quality_band`. Only in the last do chances depend on how the fraction outside is split between
the limits; there everything is judged at one end of the band, which the caller names.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from steelyard.core import quality_band, quality_index
from steelyard.core.parameter import Floats
from steelyard.core.roots import bracket, root
from steelyard.core.tails_continuous import normal_at_most, normal_quantile
from steelyard.core.tails_noncentral import student_quantile

_TINY = 1e-300
_SAME = 1e-12
_STEP = 0.005  # of k, and of a normal quantile: where a search looks first


@dataclass(frozen=True, slots=True)
class Index:
    """The quality index of a plan.

    Parameters
    ----------
    two : bool
        Whether there are two limits.
    known : bool
        Whether sigma is known.
    width : float or ndarray
        The distance of two limits in known standard deviations; NaN without any of these.

    Examples
    --------
    >>> index = Index(two=True, known=False)
    >>> [round(float(index.chance(20, 1.8, 0.02, True, greatest)), 3) for greatest in (False, True)]
    [0.777, 0.875]
    """

    two: bool
    known: bool
    width: float | Floats = np.nan

    @property
    def banded(self) -> bool:
        """Whether a fraction outside leaves the chance open."""
        return self.two and not self.known

    @property
    def least(self) -> float:
        """The least fraction outside that is possible."""
        return float(quality_index.least_fraction(self.width)) if self.two and self.known else 0.0

    def chance(
        self,
        n: ArrayLike,
        k: ArrayLike,
        p: ArrayLike,
        passing: bool,
        greatest: bool,
        share: ArrayLike | None = None,
    ) -> Floats:
        """Return the chance to pass, or to fail; in a band the greatest, the least, or that of one split."""
        p = np.asarray(p, dtype=float)
        inside = np.clip(p, _TINY, 1 - 2.0**-53)
        if self.banded and share is not None:
            found = quality_band.chance(n, k, inside, share, passing)
        elif self.banded:
            found = quality_band.extreme(n, k, inside, greatest, passing)
        elif self.two:
            found = quality_index.known_between(n, k, self.width, inside, passing)
        else:
            found = (quality_index.known if self.known else quality_index.unknown)(n, k, inside, passing)
        # Where all is outside nothing passes, where nothing is everything does.
        return np.where(p >= 1, float(not passing), np.where(p <= 0, float(passing), found))

    def critical(self, n: ArrayLike, p: ArrayLike, alpha: ArrayLike, passing: bool) -> Floats:
        """Return the k at which a lot passes, or fails, with chance alpha; the greatest over the splits."""
        n, p, alpha = (np.asarray(value, dtype=float) for value in (n, p, alpha))
        one = self._critical_of_one(n, p, alpha, passing)
        if not self.two:
            return one
        rising = -1.0 if passing else 1.0

        def surplus(k: Floats) -> Floats:
            found = self.chance(n, k, p, passing, greatest=True)
            return np.asarray(rising * np.log(np.maximum(found, _TINY) / alpha))

        if (np.abs(surplus(one)) < _SAME).all():  # the worst split is that on one side
            return one
        # Half of the fraction at least is on one side; and what fails both limits fails one or the other.
        other = (
            self._critical_of_one(n, p / 2, alpha, True)
            if passing
            else self._critical_of_one(n, p, alpha / 2, False)
        )
        return root(surplus, np.minimum(one, other), np.maximum(one, other))

    def _critical_of_one(self, n: Floats, p: Floats, alpha: Floats, passing: bool) -> Floats:
        z, end = -normal_quantile(p), "high" if passing else "low"
        if self.known:
            away = normal_quantile(alpha) / np.sqrt(n)
            return np.asarray(z - away if passing else z + away)
        return student_quantile(alpha, n - 1, np.sqrt(n) * z, end) / np.sqrt(n)

    def fraction(self, n: float, k: float, chance: float, passing: bool) -> float:
        """Return the fraction at which a lot passes, or fails, with a chance; the greatest over the splits.

        Where the chance is already reached at the least fraction that is possible, or at none, that one.
        """
        rising = -1.0 if passing else 1.0

        def surplus(z: Floats) -> Floats:
            found = self.chance(n, k, normal_at_most(z), passing, greatest=True)
            return np.asarray(rising * np.log(np.maximum(found, _TINY) / chance))

        least = normal_quantile(self.least) if self.least > 0 else np.asarray(-np.inf)
        if self.least > 0 and surplus(least) >= 0:
            return self.least
        middle = np.maximum(np.asarray(-k), least + _STEP)
        low, high = bracket(lambda z: surplus(np.maximum(z, least)), middle, np.asarray(_STEP))
        return float(normal_at_most(root(surplus, np.maximum(low, least), high)))


def first_from(meets: Callable[[int], bool], guess: int, least: int, most: int) -> int | None:
    """Return the least whole number from `least` that meets a condition which holds from somewhere on.

    Parameters
    ----------
    meets : callable
    guess : int
        Where to look first; few calls where it is close.
    least, most : int

    Returns
    -------
    int or None
        None where `most` does not meet it.

    Examples
    --------
    >>> first_from(lambda n: n >= 37, 30, 1, 100), first_from(lambda n: False, 30, 1, 100)
    (37, None)
    """
    step, good = 1, min(max(guess, least), most)
    while not meets(good):
        if good == most:
            return None
        good, step = min(good + step, most), 3 * step
    step, bad = 1, good - 1
    while bad >= least and meets(bad):
        good, bad, step = bad, bad - step, 3 * step
    bad = max(bad, least - 1)
    while good - bad > 1:
        middle = (good + bad) // 2
        good, bad = (middle, bad) if meets(middle) else (good, middle)
    return good
