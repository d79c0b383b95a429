"""Laplace's approximation: the likelihood linearised at the posterior mode."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.sites import Gaussian, Rows, Sites
from muntin.surrogate.tilted import CellLikelihood

Array = NDArray[np.float64]
_LOG_2PI = float(np.log(2.0 * np.pi))
_NEWTON_STEPS = 15


def laplace_sites(rows: Rows, lik: CellLikelihood) -> Sites:
    """Sites of the likelihood linearised at the posterior mode (Gauss-Newton), never negative."""
    inner = np.clip(lik.mean / lik.ceiling, 0.03, 0.97)
    shape = lik.reading_variance.shape
    u = np.broadcast_to(np.log(inner / (1.0 - inner)) - lik.offset, shape)
    s = np.zeros(shape)
    for _ in range(_NEWTON_STEPS):
        sites = _linearised(lik, u, s)
        pair = Gaussian(rows, sites).pair
        move = np.clip(pair.u - u, -1.5, 1.5)
        u, s = u + move, pair.s
        if np.abs(move).max(initial=0.0) < 0.02:
            break
    return _linearised(lik, u, s)


def _linearised(lik: CellLikelihood, u: Array, s: Array) -> Sites:
    """Sites of y = mean + J_u (u' - u) + J_s (s' - s), the reading linearised at u, s (S, C)."""
    g = lik.process_mean(u)
    by_u, by_s = (1.0 + lik.scale * s) * g * (1.0 - g / lik.ceiling), lik.scale * g
    precision = lik.count / lik.reading_variance
    target = lik.mean - (1.0 + lik.scale * s) * g + by_u * u + by_s * s
    return Sites(
        precision * by_u * target,
        precision * by_s * target,
        precision * by_u**2,
        precision * by_u * by_s,
        precision * by_s**2,
    )


def laplace_evidence(gaussian: Gaussian, lik: CellLikelihood) -> Array:
    """Laplace's evidence (S,) where the sites are the likelihood linearised at the mode."""
    t, p = gaussian.sites, gaussian.pair
    v = lik.reading_variance / lik.count
    residual = lik.mean - (1.0 + lik.scale * p.s) * lik.process_mean(p.u)
    log_like = -0.5 * (residual**2 / v + np.log(v) + _LOG_2PI) + lik.log_within()
    curved = t.uu * p.u**2 + 2.0 * t.us * p.u * p.s + t.ss * p.s**2
    return gaussian.log_integral() + (log_like + 0.5 * curved - t.u * p.u - t.s * p.s).sum(1)
