"""Laplace's approximation: the likelihood linearised at the posterior mode."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.sites import Gaussian, Rows, Sites
from muntin.surrogate.tilted import CellLikelihood, pull_of

Array = NDArray[np.float64]
_NEWTON_STEPS = 15


def laplace_sites(rows: Rows, lik: CellLikelihood) -> Sites:
    """Sites of the likelihood linearised at the posterior mode (Gauss-Newton), never negative."""
    shape = lik.base_variance.shape
    u = np.broadcast_to(_first(lik), shape)
    s = np.zeros(shape)
    for _ in range(_NEWTON_STEPS):
        sites = _linearised(lik, u, s)
        pair = Gaussian(rows, sites).pair
        move = np.clip(pair.u - u, -1.5, 1.5) if lik.link == "logit" else pair.u - u
        u, s = u + move, pair.s
        if np.abs(move).max(initial=0.0) < 0.02:
            break
    return _linearised(lik, u, s)


def _first(lik: CellLikelihood) -> Array:
    """Centred latent values (S, C) or (C,) that the cell means themselves suggest."""
    if lik.link != "logit":
        return lik.mean - lik.offset
    inner = np.clip(lik.mean / lik.ceiling, 0.03, 0.97)
    return np.log(inner / (1.0 - inner)) - lik.offset


def _linearised(lik: CellLikelihood, u: Array, s: Array) -> Sites:
    """Sites of y = mean + J_u (u' - u) + J_s (s' - s), the reading linearised at u, s (S, C)."""
    g = lik.process_mean(u)
    by_u, by_s = (1.0 + lik.scale * s) * lik.slope(u), lik.scale * g
    v = lik.reading_variance(u) / lik.count
    pull = pull_of(lik.mean - (1.0 + lik.scale * s) * g, v, lik.censored)
    precision = pull.precision
    target = pull.score + precision * (by_u * u + by_s * s)
    return Sites(
        by_u * target,
        by_s * target,
        precision * by_u**2,
        precision * by_u * by_s,
        precision * by_s**2,
    )


def laplace_evidence(gaussian: Gaussian, lik: CellLikelihood) -> Array:
    """Laplace's evidence (S,) where the sites are the likelihood linearised at the mode."""
    t, p = gaussian.sites, gaussian.pair
    curved = t.uu * p.u**2 + 2.0 * t.us * p.u * p.s + t.ss * p.s**2
    own = lik.log_density(p.u, p.s) + 0.5 * curved - t.u * p.u - t.s * p.s
    return gaussian.log_integral() + own.sum(1)
