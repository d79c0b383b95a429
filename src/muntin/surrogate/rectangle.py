"""Probability of a rectangle under a multivariate normal law, at many conditions at once."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.bivariate import bivariate_normal

Array = NDArray[np.float64]
_PRIMES = np.array([2.0, 3.0, 5.0, 7.0, 11.0, 13.0, 17.0])
_POINTS = 251
# Rows at a time, so that the work stays in the cache.
_ROWS = 64
# scipy's inverse is infinite at 0 and 1.
_LEAST, _MOST = 1e-300, 1.0 - 1e-16


def pair_excess(h: Array, k: Array, rho: Array) -> Array:
    """Phi2(h, k; rho) - Phi(h) Phi(k) (n,), |rho| < 1; nothing where a limit is infinite."""
    out = np.zeros(len(rho))
    tied = np.isfinite(h) & np.isfinite(k) & (rho != 0.0)
    h, k, rho = h[tied], k[tied], rho[tied]
    out[tied] = bivariate_normal(h, k, rho) - _ndtr(h) * _ndtr(k)
    return out


def rectangle(low: Array, high: Array, correlation: Array) -> Array:
    """Probability (n,) of rectangles low to high (n, R) under N(0, correlation (n, R, R)).

    One score after the other given those before (Genz 1992, eqs 3-6), averaged over Richtmyer's
    lattice folded at the middle (Genz & Bretz 2009, section 4.2), the same for every condition.
    """
    lattice = np.outer(np.arange(1, _POINTS + 1), np.sqrt(_PRIMES[: low.shape[1] - 1])) % 1.0
    u: Array = np.abs(2.0 * lattice - 1.0)
    L = np.asarray(np.linalg.cholesky(correlation), dtype=float)
    parts = [slice(i, i + _ROWS) for i in range(0, len(low), _ROWS)]
    return np.concatenate([np.zeros(0), *(_part(low[p], high[p], L[p], u) for p in parts)])


def _part(low: Array, high: Array, L: Array, u: Array) -> Array:
    """The same for some of the conditions, L (n, R, R) and lattice u (Q, R - 1) given."""
    n, R = low.shape
    drawn, met = np.zeros((n, R - 1, len(u))), np.ones((n, len(u)))
    for i in range(R):
        moved = np.einsum("nj,njq->nq", L[:, i, :i], drawn[:, :i])
        under = _ndtr((low[:, i, None] - moved) / L[:, i, i, None])
        within = _ndtr((high[:, i, None] - moved) / L[:, i, i, None]) - under
        met *= within
        if i < R - 1:
            drawn[:, i] = _ndtri(np.clip(under + u[:, i] * within, _LEAST, _MOST))
    return met.mean(axis=1)


def _ndtr(z: Array) -> Array:
    from scipy.special import ndtr

    return np.asarray(ndtr(z))


def _ndtri(p: Array) -> Array:
    from scipy.special import ndtri

    return np.asarray(ndtri(p))
