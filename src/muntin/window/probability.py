"""Probabilities that a condition meets a target, from weighted nodes.

`p_mean` is the chance that the process mean g(f) meets it; `p_well` that one future well on a new
plate does, which adds the shared errors and the noise of a reading (Peterson 2004).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.links import latent_of, mean_of, slope_of
from muntin.surrogate.nodes import Surface

Array = NDArray[np.float64]
# Trapezoid points of a standard normal. A reading crosses its target over about 0.2 logits; where
# the latent sd is large against that, the points must lie closer.
_COARSE, _FINE = np.linspace(-4.5, 4.5, 19), np.linspace(-4.75, 4.75, 39)
_FINE_ABOVE = 0.8
_CHUNK = 2_000_000


@dataclass(frozen=True)
class Target:
    """Limits of one response in its natural unit; infinite where there is none."""

    low: float = -np.inf
    high: float = np.inf


def _normal_weights(z: Array) -> Array:
    density = np.exp(-0.5 * z**2)
    return density / density.sum()


def _below(z: Array) -> Array:
    from scipy.special import ndtr

    return np.asarray(ndtr(z))


def mean_meets(surface: Surface, moments: tuple[Array, Array], target: Target) -> Array:
    """p_mean (n,) from latent moments (S, n)."""
    return np.asarray(surface.weights @ node_mean_meets(surface, moments, target))


def node_mean_meets(surface: Surface, moments: tuple[Array, Array], target: Target) -> Array:
    """Probability (S, n) at each node that the process mean meets the target."""
    mean, variance = moments
    sd = np.sqrt(variance)
    high = _below((surface.thresholds(target.high) - mean) / sd)
    low = _below((surface.thresholds(target.low) - mean) / sd)
    if not np.isfinite(target.high):
        return 1.0 - low
    return high - low


def well_meets(
    surface: Surface, moments: tuple[Array, Array], target: Target, wander: Array | float = 0.0
) -> Array:
    """p_well (n,) from latent moments (S, n): one future well on a new plate.

    wander (S, n): latent variance that its setting errors make. Its reading has the common noise;
    the uncertainty that a reading may state of itself is not known beforehand and not added.
    """
    mean, variance = moments
    errors = surface.errors
    inside = (errors.inside**2).sum(1)[:, None] + wander
    noise = errors.noise[:, None] ** 2
    if surface.link == "logit":
        return _fraction_well(surface, mean, variance + inside, target)
    sd = np.sqrt(variance + inside + noise)
    low, high = surface.thresholds(target.low), surface.thresholds(target.high)
    return np.asarray(surface.weights @ (_below((high - mean) / sd) - _below((low - mean) / sd)))


def _fraction_well(surface: Surface, mean: Array, variance: Array, target: Target) -> Array:
    """The reading is (1 + scale) g(f) + noise; scale and noise are Gaussian given f."""
    sd = np.sqrt(variance)
    out = np.ones(mean.shape[1])
    fine = sd.max(axis=0) > _FINE_ABOVE
    for chosen, z in ((fine, _FINE), (~fine, _COARSE)):
        size = max(1, _CHUNK // (len(mean) * len(z)))
        columns = np.flatnonzero(chosen)
        for start in range(0, len(columns), size):
            part = columns[start : start + size]
            met = np.zeros((len(mean), len(part)))
            for limit, sign in ((target.high, 1.0), (target.low, -1.0)):
                met += sign * _reading_below(surface, mean[:, part], sd[:, part], z, limit)
            out[part] = surface.weights @ met
    return np.clip(out, 0.0, 1.0)


def _reading_below(surface: Surface, mean: Array, sd: Array, z: Array, limit: float) -> Array:
    """Probability (S, n) that a reading lies below a limit, f ~ N(mean, sd^2), summed over z.

    The step that a small noise makes of it in f is taken out of the sum by the Gaussian step
    that has the same place and slope, whose average over f is known.
    """
    if np.isinf(limit):
        return np.full_like(mean, 1.0 if limit > 0.0 else 0.0)
    errors = surface.errors
    ceiling, noise = errors.ceiling[:, None], errors.noise[:, None] ** 2
    scale = (errors.scale**2).sum(1)[:, None]
    place = surface.thresholds(limit)
    slope = slope_of("logit", np.where(np.isfinite(place), place, 0.0), ceiling)
    width = np.sqrt(noise + scale * limit**2) / slope
    step = _below((place - mean) / np.sqrt(sd**2 + width**2))
    f = mean[..., None] + sd[..., None] * z
    g = mean_of("logit", f, ceiling[..., None])
    below = _below((limit - g) / np.sqrt(noise[..., None] + scale[..., None] * g * g))
    below -= _below((place[..., None] - f) / width[..., None])
    return step + below @ _normal_weights(z)


def process_mean(surface: Surface, moments: tuple[Array, Array]) -> Array:
    """Posterior mean (n,) of the process mean g(f), natural unit."""
    mean, variance = moments
    if surface.link == "identity":
        return np.asarray(surface.weights @ mean)
    if surface.link == "log":
        return np.asarray(surface.weights @ np.exp(mean + 0.5 * variance))
    out = np.zeros(mean.shape[1])
    sd, ceiling = np.sqrt(variance), surface.errors.ceiling[:, None]
    for z, weight in zip(_FINE, _normal_weights(_FINE), strict=True):
        out += weight * (surface.weights @ mean_of(surface.link, mean + z * sd, ceiling))
    return out


def process_quantile(surface: Surface, moments: tuple[Array, Array], level: float) -> Array:
    """Quantile (n,) of the process mean g(f), natural unit, by bisection on the mixture."""
    mean, variance = moments
    sd, ceiling = np.sqrt(variance), surface.errors.ceiling[:, None]
    low, high = (mean - 8.0 * sd).min(0), (mean + 8.0 * sd).max(0)
    if surface.link == "logit":
        # The bisection runs over logits under a ceiling of 1; a lower ceiling lowers them.
        least = mean_of("logit", np.minimum(mean - 8.0 * sd, 30.0), ceiling)
        low = latent_of("logit", least).min(axis=0)
    for _ in range(50):
        middle = 0.5 * (low + high)
        own = latent_of(surface.link, mean_of(surface.link, middle), ceiling)
        under = surface.weights @ _below((own - mean) / sd) < level
        low, high = np.where(under, middle, low), np.where(under, high, middle)
    return mean_of(surface.link, 0.5 * (low + high))
