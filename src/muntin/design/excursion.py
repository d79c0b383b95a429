"""Expected uncertainty of a target's excursion set after new wells.

The latent value at a condition is N(m, s^2); new wells are expected to explain the share rho of
s^2. With p1 the probability after them, E[p1^2] is the chance that two draws of correlation rho
both meet the target (Bect et al. 2012; Chevalier et al. 2014); for a one-sided target the bivariate
normal reduces to Owen's T (Owen 1956).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.bivariate import bivariate_normal

Array = NDArray[np.float64]
# A verdict so many sds off its threshold is decided: less than 1e-9 of it is open.
_DECIDED = 6.0


def expected_variance(c: Array, rho: Array) -> Array:
    """E[p1 (1 - p1)] = 2 T(c, sqrt((1 - rho) / (1 + rho))), c = (m - threshold) / s."""
    from scipy.special import owens_t

    return 2.0 * np.asarray(owens_t(c, np.sqrt((1.0 - rho) / (1.0 + rho))))


def expected_wrong(c: Array, rho: Array) -> Array:
    """E[min(p1, 1 - p1)] = 2 T(c, sqrt((1 - rho) / rho)): the chance of a wrong call."""
    from scipy.special import owens_t

    with np.errstate(divide="ignore"):
        return 2.0 * np.asarray(owens_t(c, np.sqrt((1.0 - rho) / rho)))


def _where_open(c: Array, rho: Array) -> Array:
    """E[p1 (1 - p1)], 0 where the verdict is decided."""
    c, rho = np.broadcast_arrays(c, rho)
    still_open = np.abs(c) < _DECIDED
    out = np.zeros(c.shape)
    out[still_open] = expected_variance(c[still_open], rho[still_open])
    return out


def expected_square(low: Array, high: Array, rho: Array) -> Array:
    """E[p1^2] for limits low < high of the standardised latent value, infinite where absent."""
    from scipy.special import ndtr

    if np.all(np.isinf(high)):
        return np.asarray(ndtr(-low)) - _where_open(low, rho)
    if np.all(np.isinf(low)):
        return np.asarray(ndtr(high)) - _where_open(high, rho)
    both = bivariate_normal(high, high, rho) + bivariate_normal(low, low, rho)
    return np.maximum(both - 2.0 * bivariate_normal(low, high, rho), 0.0)
