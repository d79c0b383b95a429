"""Mixes of bottles: each makes what is asked, and none is missed."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog

from muntin.record.blending import blends

STEADY = settings(deadline=None, derandomize=True, max_examples=80)


@st.composite
def cases(draw: st.DrawFn) -> tuple[np.ndarray, np.ndarray]:
    """Contents (things, bottles), and what is asked: on a grid, so that ties and zeros occur."""
    things, bottles = draw(st.integers(1, 3)), draw(st.integers(1, 5))
    levels = st.integers(0, 10).map(lambda n: 50.0 * n)
    contents = draw(st.lists(levels, min_size=things * bottles, max_size=things * bottles))
    asked = draw(st.lists(levels, min_size=things, max_size=things))
    return np.array(contents).reshape(things, bottles), np.array(asked)


@given(cases())
@STEADY
def test_mixes_make_what_is_asked_and_are_found_whenever_there_is_one(
    case: tuple[np.ndarray, np.ndarray],
) -> None:
    contents, asked = case
    things, bottles = contents.shape
    found = blends(contents, asked)
    # The oracle is a linear programme: is there any mix at all?
    equations = np.vstack([contents, np.ones(bottles)])
    possible = linprog(np.zeros(bottles), A_eq=equations, b_eq=np.append(asked, 1.0)).success
    assert bool(found) == possible
    for shares in found:
        assert (shares >= 0).all()
        assert shares.sum() == pytest.approx(1.0, abs=1e-12)
        np.testing.assert_allclose(contents @ shares, asked, atol=1e-6)
        assert np.count_nonzero(shares) <= things + 1
    counts = [np.count_nonzero(shares) for shares in found]
    assert counts == sorted(counts)


def test_two_bottles_by_hand() -> None:
    # 50 and 500 mM to 200 mM: (200 - 50) / 450 of the stronger one.
    (shares,) = blends(np.array([[50.0, 500.0]]), np.array([200.0]))
    np.testing.assert_allclose(shares, [300 / 450, 150 / 450])


def test_one_bottle_is_better_than_two() -> None:
    found = blends(np.array([[0.0, 200.0, 400.0]]), np.array([200.0]))
    np.testing.assert_allclose(found[0], [0.0, 1.0, 0.0])
    np.testing.assert_allclose(found[1], [0.5, 0.0, 0.5])


def test_what_is_kept_constant_fixes_the_diluted_bottle() -> None:
    # Buffer 80 mM, salt 1,000 mM, water, to 20 mM buffer and 250 mM salt: a quarter each.
    contents = np.array([[80.0, 0.0, 0.0], [0.0, 1000.0, 0.0]])
    (shares,) = blends(contents, np.array([20.0, 250.0]))
    np.testing.assert_allclose(shares, [0.25, 0.25, 0.5])


def test_fewer_bottles_come_before_larger_shares() -> None:
    # (1, 1) from (10, 10) and water, a tenth of the former, or of three bottles in equal shares.
    contents = np.array([[0.0, 10.0, 3.0, 0.0], [0.0, 10.0, 0.0, 3.0]])
    found = blends(contents, np.array([1.0, 1.0]))
    np.testing.assert_allclose(found[0], [0.9, 0.1, 0.0, 0.0])
    np.testing.assert_allclose(found[1], [1 / 3, 0.0, 1 / 3, 1 / 3])


def test_two_bottles_of_the_same_are_not_shared_out() -> None:
    found = blends(np.array([[100.0, 100.0]]), np.array([100.0]))
    np.testing.assert_allclose(found, [[1.0, 0.0], [0.0, 1.0]])


def test_nothing_to_blend_takes_one_bottle() -> None:
    np.testing.assert_allclose(blends(np.zeros((0, 2)), np.zeros(0)), [[1, 0], [0, 1]])
