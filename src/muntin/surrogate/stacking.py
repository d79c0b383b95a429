"""Stacking of predictive distributions."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def stacking_shares(log_density: Array) -> Array:
    """Shares (K,) that maximise the mean log of the mixed leave-one-out densities (K, n).

    Yao, Vehtari, Simpson & Gelman 2018, eq. 2; solved by expectation maximisation, whose fixed
    points are the optimum of this concave problem.
    """
    k, n = log_density.shape
    shares = np.full(k, 1.0 / k)
    if n == 0 or k == 1:
        return shares
    density = np.exp(log_density - log_density.max(axis=0))
    for _ in range(2000):
        mixed = shares[:, None] * density
        updated = (mixed / mixed.sum(axis=0)).mean(axis=1)
        if np.abs(updated - shares).max() < 1e-6:
            break
        shares = updated
    shares = np.where(updated < 1e-3, 0.0, updated)
    return shares / shares.sum()
