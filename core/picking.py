"""Random item numbers to draw from a lot, the same for the same seed on every machine."""

from __future__ import annotations

import random

from steelyard.core.numbers import read_whole

MOST_ITEMS = 1_000_000_000
MOST_PICKED = 100_000


def pick(lot: int, n: int, seed: int) -> list[int]:
    """Return different item numbers from 1 to `lot`, in rising order, every selection equally likely.

    Parameters
    ----------
    lot : int
        Items in the lot.
    n : int
        Items to draw.
    seed : int
        Any whole number from 0; note it beside the result, so that the draw can be repeated.

    Raises
    ------
    InvalidValue
        When a number is not whole or out of range.

    Notes
    -----
    The first `n` steps of a Fisher-Yates shuffle. Only ``random()`` of Python's generator is used: its
    sequence is promised to stay the same for a seed, that of other methods is not.

    Examples
    --------
    >>> pick(800, 5, 7)
    [61, 122, 260, 431, 522]
    """
    lot = read_whole(lot, "lot", 1, MOST_ITEMS)
    n = read_whole(n, "n", 1, min(lot, MOST_PICKED))
    chance = random.Random(read_whole(seed, "seed", 0, 2**53))
    moved: dict[int, int] = {}
    picked = []
    for place in range(n):
        other = place + int(chance.random() * (lot - place))
        picked.append(moved.get(other, other) + 1)
        moved[other] = moved.get(place, place)
    return sorted(picked)
