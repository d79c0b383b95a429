"""Predictive density of a future reading, on the scale where its noise is additive."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.links import mean_of, slope_of
from muntin.surrogate.nodes import Surface
from muntin.window.probability import Moments

Array = NDArray[np.float64]
_STEPS = 4
_MOST_MOVE = 1.0
_ABSCISSAE, _WEIGHTS = np.polynomial.hermite_e.hermegauss(9)


def reading_density(
    surface: Surface, moments: Moments, limit: float, wander: Array | float = 0.0
) -> Array:
    """Density (S, n) at a limit of one future well's reading at each node, latent law (S, n), whose
    skewness is left out.

    wander (S, n): latent variance that its setting errors make. The density is that of ln y for a
    positive response. For a fraction the latent value is integrated by nine Gauss-Hermite points
    about its mode given the reading (Liu & Pierce 1994).
    """
    mean, variance, *_ = moments
    variance = variance + wander + (surface.errors.inside**2).sum(1)[:, None]
    if surface.link == "logit":
        return _of_fraction(surface, mean, variance, limit)
    return _normal(surface.thresholds(limit) - mean, variance + surface.errors.noise[:, None] ** 2)


def _of_fraction(surface: Surface, mean: Array, variance: Array, limit: float) -> Array:
    errors = surface.errors
    ceiling, noise = errors.ceiling[:, None], errors.noise[:, None] ** 2
    scale = (errors.scale**2).sum(1)[:, None]
    # The start lies between the mean and the limit's place, where a flat link leads nowhere.
    reach = 3.0 * np.sqrt(variance)
    u = mean + np.clip(np.clip(surface.thresholds(limit), -6.0, 6.0) - mean, -reach, reach)
    v = noise + scale * limit**2
    for _ in range(_STEPS):
        g, slope = mean_of("logit", u, ceiling), slope_of("logit", u, ceiling)
        gain = variance * slope / (v + variance * slope**2)
        u = u + np.clip(mean + gain * (limit - g + slope * (u - mean)) - u, -_MOST_MOVE, _MOST_MOVE)
    g, slope = mean_of("logit", u, ceiling), slope_of("logit", u, ceiling)
    bent = slope**2 - (limit - g) * slope * (1.0 - 2.0 * g / ceiling)
    sd = 1.0 / np.sqrt(1.0 / variance + np.maximum(bent, 0.0) / v)
    out = np.zeros_like(u)
    for z, weight in zip(_ABSCISSAE, _WEIGHTS, strict=True):
        at = u + sd * z
        g = mean_of("logit", at, ceiling)
        prior = _normal(at - mean, variance)
        out += weight * np.exp(0.5 * z**2) * sd * prior * _normal(limit - g, noise + scale * g**2)
    return out


def _normal(away: Array, variance: Array) -> Array:
    return np.asarray(np.exp(-0.5 * away**2 / variance) / np.sqrt(2.0 * np.pi * variance))
