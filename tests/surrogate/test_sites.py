"""Inverses of stacked precisions against numpy's."""

import numpy as np
import pytest

from muntin.surrogate.sites import invert


@pytest.mark.parametrize("size", [1, 2, 17])
def test_inverses_and_determinants_are_those_of_numpy(size):
    A = np.random.default_rng(size).normal(size=(5, size, size + 1))
    M = A @ np.swapaxes(A, 1, 2) + 0.1 * np.eye(size)
    V, log_det, bad = invert(M.copy())
    assert np.allclose(V, np.linalg.inv(M), rtol=1e-9, atol=1e-12)
    assert np.array_equal(V, np.swapaxes(V, 1, 2))
    assert np.allclose(log_det, np.linalg.slogdet(M)[1], rtol=1e-12, atol=1e-12)
    assert not len(bad)


def test_matrices_that_are_not_positive_definite_are_named_and_leave_the_others_alone():
    M = np.stack([np.eye(3), np.diag([1.0, -1.0, 2.0]), 2.0 * np.eye(3), np.full((3, 3), np.nan)])
    V, log_det, bad = invert(M)
    assert list(bad) == [1]
    assert np.isnan(V[3]).all()
    assert np.isnan(log_det[3])
    assert np.allclose(V[[0, 2]], [np.eye(3), 0.5 * np.eye(3)], rtol=1e-12)
    assert log_det[2] == pytest.approx(3.0 * np.log(2.0))
