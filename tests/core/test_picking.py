"""Item numbers to draw: every selection equally likely, repeatable, in range."""

from __future__ import annotations

from collections import Counter

import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.addin import SY_PICK
from steelyard.core.errors import InvalidValue
from steelyard.core.picking import pick


@given(st.integers(1, 500), st.integers(0, 10**6), st.data())
def test_different_numbers_of_the_lot_in_rising_order(lot, seed, data):
    n = data.draw(st.integers(1, lot))
    found = pick(lot, n, seed)
    assert found == sorted(set(found))
    assert len(found) == n
    assert found[0] >= 1
    assert found[-1] <= lot
    assert pick(lot, n, seed) == found


def test_every_pair_is_equally_likely():
    """A chi-square of 14 degrees of freedom: 36.1 is exceeded once in a thousand such tests."""
    draws = Counter(tuple(pick(6, 2, seed)) for seed in range(6000))
    assert len(draws) == 15
    assert sum((count - 400) ** 2 / 400 for count in draws.values()) < 36.1


def test_the_same_seed_gives_the_same_items_for_good():
    """Noted once; a change would make drawn samples unrepeatable."""
    assert pick(800, 5, 7) == [61, 122, 260, 431, 522]


@pytest.mark.parametrize(("lot", "n", "seed"), [(5, 6, 1), (0, 1, 1), (5, 2.5, 1), (5, 2, -1), (5, 2, 0.5)])
def test_impossible_draws_are_refused(lot, n, seed):
    with pytest.raises(InvalidValue, match="must be a whole number from"):
        pick(lot, n, seed)


def test_cell():
    assert SY_PICK(800, 5, 7) == [[61], [122], [260], [431], [522]]
    assert SY_PICK(5, 6, 1) == "SY: n must be a whole number from 1 to 5, but got 6"
