"""How far readings to come may move the posterior mean: one Cholesky factor a node."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from muntin.design.outlook import Outlook

Array = NDArray[np.float64]


def moves(outlook: Outlook, X: Array, wells: Sequence[int]) -> Array:
    """U (S, n, k): reading k candidates in order moves the posterior mean at coded X (n, D) by
    U xi, xi ~ N(0, I_k).

    With R the covariance of the readings (linearised, in latent units), C theirs with f at X and
    L L' = R, U = C L'^-1: the sum of squares over the first j columns is the variance of f that the
    first j readings explain.
    """
    picked = np.asarray(wells, dtype=np.intp)
    Z = outlook.candidates[picked]
    R = outlook.surface.covariance(Z, Z)
    errors, lever = outlook.surface.errors, outlook.lever[:, picked]
    for j, groups in enumerate(outlook.inside):
        R = R + errors.inside[:, j, None, None] ** 2 * _same(groups[picked])
    for j, groups in enumerate(outlook.scale):
        together = lever[:, :, None] * lever[:, None, :] * _same(groups[picked])
        R = R + errors.scale[:, j, None, None] ** 2 * together
    index = np.arange(len(picked))
    R[:, index, index] += outlook.noise[:, picked]
    L = np.linalg.cholesky(R)
    C = outlook.surface.covariance(X, Z)
    return np.swapaxes(np.linalg.solve(L, np.swapaxes(C, 1, 2)), 1, 2)


def _same(groups: NDArray[np.intp]) -> NDArray[np.bool_]:
    """Which of k wells share a group, (k, k)."""
    return np.asarray(groups[:, None] == groups[None, :])
