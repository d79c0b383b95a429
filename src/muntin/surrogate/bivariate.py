"""The bivariate normal distribution function."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def bivariate_normal(h: Array, k: Array, rho: Array) -> Array:
    """Phi2(h, k; rho) for rho < 1 through Owen's T (Owen 1956, eq. 2.1)."""
    from scipy.special import ndtr, owens_t

    h, k, rho = np.broadcast_arrays(*(np.asarray(v, dtype=float) for v in (h, k, rho)))
    # T is continuous but its argument is not at 0; a tiny shift picks the limit.
    # Beyond 38 a probability is 0 or 1 to the last digit, and infinities leave no 0 / 0.
    h, k = np.clip(np.where(h == 0.0, 1e-300, h), -38, 38), np.clip(k, -38, 38)
    k = np.where(k == 0.0, 1e-300, k)
    root = np.sqrt(np.maximum(1.0 - rho**2, 1e-30))
    with np.errstate(over="ignore"):
        first = owens_t(h, (k - rho * h) / (h * root))
        second = owens_t(k, (h - rho * k) / (k * root))
    apart = np.where(h * k < 0.0, 0.5, 0.0)
    return 0.5 * (ndtr(h) + ndtr(k)) - first - second - apart
