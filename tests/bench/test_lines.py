from itertools import combinations, product

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.bench.lines import share_lines

FREE = st.lists(st.integers(0, 6), min_size=1, max_size=6)
NEEDS = st.lists(st.integers(1, 8), min_size=1, max_size=4)


def possible(free, needs):
    """Try every way of giving each line to one stock or to none."""
    for owners in product(range(-1, len(needs)), repeat=len(free)):
        got = [
            sum(f for f, o in zip(free, owners, strict=True) if o == k) for k in range(len(needs))
        ]
        if all(g >= n for g, n in zip(got, needs, strict=True)):
            return True
    return False


@given(FREE, NEEDS, st.integers(0, 99))
def test_a_sharing_is_found_exactly_when_one_exists(free, needs, seed):
    demand = dict(enumerate(needs))
    if not possible(free, needs):
        with pytest.raises(ValueError, match="no two may share a line"):
            share_lines(free, demand, np.random.default_rng(seed))
        return
    shared = share_lines(free, demand, np.random.default_rng(seed))
    lines = [line for own in shared.values() for line in own]
    assert len(lines) == len(set(lines))
    for stock, own in shared.items():
        held = [free[line] for line in own]
        assert sum(held) >= demand[stock]
        for fewer in combinations(held, len(held) - 1):
            assert sum(fewer) < demand[stock]


def test_a_small_stock_gets_the_line_that_just_holds_it():
    shared = share_lines([12, 5, 9, 2], {"pH 5": 5}, np.random.default_rng(0))
    assert shared == {"pH 5": (1,)}


def test_like_lines_are_dealt_at_random():
    first = {share_lines([4] * 5, {"a": 3}, np.random.default_rng(k))["a"] for k in range(40)}
    assert first == {(0,), (1,), (2,), (3,), (4,)}


def test_the_refusal_counts_stocks_and_wells():
    message = r"2 stocks need 7, 1 wells and no two may share a line; the lines have 4, 3 free"
    with pytest.raises(ValueError, match=message):
        share_lines([4, 0, 3], {"a": 1, "b": 7}, np.random.default_rng(0))
