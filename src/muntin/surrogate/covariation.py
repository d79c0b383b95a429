"""Correlation of the noise of two responses that were read in the same wells.

With C_r = L_r L_r' the covariance of the readings of response r and D the products of their noise
sds where one well has both, a noise correlation rho gives the readings the cross-covariance rho D.
The singular values s_k of L_1^-1 D L_2^-T split both into independent pairs of correlation rho s_k
(canonical correlations, Hotelling 1936), so that what each fit has used up is accounted for.
sum s_k^2 = tr((I - H_1)(I - H_2)), H the hat matrices, is the information on rho at 0: the
effective number of wells.

The level of each noise is left free: its integral with a flat prior on the log is Fisher's (1915)
density of a sample correlation, which it is exactly where all s_k are 1.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.reading_law import ReadingLaw

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# atanh(rho) ~ N(0, 0.5^2) a priori, which keeps 95 % of rho within 0.75 of 0.
_PRIOR_SD = 0.5
_GRID = np.linspace(-3.0, 3.0, 301)
_SPREAD = np.sinh(np.linspace(-5.0, 5.0, 121))
_SPACING = np.cosh(np.linspace(-5.0, 5.0, 121))
# Pairs below carry more of the surfaces, which may be curved otherwise than their prior says, than
# of the noise.
_LEAST_SHARE = 0.5


@dataclass(frozen=True)
class NoiseCorrelation:
    """Posterior mean of the correlation, its central 95 % interval and the effective number."""

    mean: float
    low: float
    high: float
    effective: float


@dataclass(frozen=True)
class Pairs:
    """Independent pairs a, b (K,) of unit variance and correlation rho * share + known, (K,)."""

    a: Array
    b: Array
    share: Array
    known: Array


def noise_correlation(first: ReadingLaw, second: ReadingLaw, both: Index) -> NoiseCorrelation:
    """The posterior of the correlation; both (m, 2): positions in the two laws of one well each."""
    return posterior_of(canonical_pairs(first, second, both))


def canonical_pairs(first: ReadingLaw, second: ReadingLaw, both: Index) -> Pairs:
    """The pairs in which noise makes up most; what setting errors share is known beforehand."""
    i, j = both.T
    ones = (first.own, second.own)
    white = [_whitened(law, at) for law, at in zip((first, second), (i, j), strict=True)]
    (a, A), (b, B) = white
    total = ones[0][i] * ones[1][j]
    U, s, Vt = np.linalg.svd(A @ B.T, full_matrices=False)
    kept = s >= _LEAST_SHARE
    left, right = U[:, kept].T @ A, Vt[kept] @ B
    noise = first.noise[i] * second.noise[j] / total
    set_together = (first.moved[i] * second.moved[j]).sum(1) / total
    share, known = ((left * part * right).sum(1) for part in (noise, set_together))
    return Pairs(U[:, kept].T @ a, Vt[kept] @ b, share, known)


def _whitened(law: ReadingLaw, at: Index) -> tuple[Array, Array]:
    """L^-1 times the misfits (n,), and times the own sds of the readings `at` (n, m)."""
    L = np.linalg.cholesky(law.covariance)
    columns = np.zeros((len(law), len(at)))
    columns[at, np.arange(len(at))] = law.own[at]
    solved = np.linalg.solve(L, np.column_stack([law.misfit, columns]))
    return solved[:, 0], solved[:, 1:]


def posterior_of(pairs: Pairs) -> NoiseCorrelation:
    """The posterior on a grid of atanh(rho)."""
    rho = np.tanh(_GRID)
    log_p = -0.5 * (_GRID / _PRIOR_SD) ** 2
    if len(pairs.a):
        log_p = log_p + log_likelihood(pairs, rho)
    p = np.exp(log_p - log_p.max())
    p /= p.sum()
    below = np.cumsum(p) - 0.5 * p
    low, high = np.tanh(np.interp([0.025, 0.975], below, _GRID))
    return NoiseCorrelation(float(p @ rho), float(low), float(high), float((pairs.share**2).sum()))


def log_likelihood(pairs: Pairs, rho: Array) -> Array:
    """Log likelihood (R,) of correlations rho, up to a constant; both noise levels integrated.

    Fisher 1915: the integral of (cosh d - r)^-K over d, here with the pairs' own correlations.
    """
    K = len(pairs.a)
    c = np.clip(rho[:, None] * pairs.share + pairs.known, -0.9999, 0.9999)
    left = 1.0 - c**2
    A, B = (pairs.a**2 / left).sum(1), (pairs.b**2 / left).sum(1)
    root = np.sqrt(A * B)
    r = (c * pairs.a * pairs.b / left).sum(1) / root
    width = np.sqrt((1.0 - r) / K)
    log_f = -K * np.log(np.cosh(width[:, None] * _SPREAD) - r[:, None])
    top = log_f.max(axis=1, keepdims=True)
    integral = np.log((np.exp(log_f - top) * _SPACING).sum(1) * width) + top[:, 0]
    return -0.5 * np.log(left).sum(1) - K * np.log(root) + integral
