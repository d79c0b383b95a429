"""Probabilities that a condition meets a target, from weighted nodes.

`p_mean` is the chance that the process mean g(f) meets it; `p_well` that one future well on a new
plate does, which adds the shared errors and the noise of a reading (Peterson 2004).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.links import latent_of, mean_of, slope_of
from muntin.surrogate.nodes import Latent, Surface

Array = NDArray[np.float64]
# Trapezoid points of a standard normal. A reading crosses its target over about 0.2 logits; where
# the latent sd is large against that, the points must lie closer.
_COARSE, _FINE = np.linspace(-4.5, 4.5, 19), np.linspace(-4.75, 4.75, 39)
_FINE_ABOVE = 0.8
_CHUNK = 2_000_000
# So many nodes, each with a point of its own, sum a normal law as well as a few with all points.
_CROWD = 2000
_GOLDEN = (np.sqrt(5.0) - 1.0) / 2.0
# Beyond this the first term no longer makes a law.
_MOST_SKEW = 1.2
_NO_SKEW = np.zeros((1, 1))
Moments = tuple[Array, ...]


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


def latent_law(moments: Moments) -> Latent:
    """The law of mean and variance (S, n), and of a skewness where there is one."""
    mean, variance, *skew = moments
    if not skew or not skew[0].any():
        return Latent(mean, variance, _NO_SKEW)
    return Latent(mean, variance, np.clip(skew[0], -_MOST_SKEW, _MOST_SKEW))


def skewed_below(z: Array, skew: Array) -> Array:
    """Chance that a standardised variable lies below z (Edgeworth's first term; Kendall & Stuart
    1977, section 6.18).
    """
    p = _below(z)
    if skew is not _NO_SKEW:
        z = np.clip(z, -30.0, 30.0)
        p = p - skew * ((z * z - 1.0) * np.exp(-0.5 * z * z) / (6.0 * np.sqrt(2.0 * np.pi)))
    return np.clip(p, 0.0, 1.0)


def mean_meets(surface: Surface, moments: Moments, target: Target) -> Array:
    """p_mean (n,) from the latent law (S, n)."""
    return np.asarray(surface.weights @ node_mean_meets(surface, moments, target))


def node_mean_meets(surface: Surface, moments: Moments, target: Target) -> Array:
    """Probability (S, n) at each node that the process mean meets the target."""
    mean, variance, skew = latent_law(moments)
    sd = np.sqrt(variance)
    low = _finite_below(surface, mean, sd, skew, target.low)
    if not np.isfinite(target.high):
        return 1.0 - low
    return np.maximum(_finite_below(surface, mean, sd, skew, target.high) - low, 0.0)


def _finite_below(surface: Surface, mean: Array, sd: Array, skew: Array, limit: float) -> Array:
    """Chance (S, n) that the process mean lies below a limit, which a ceiling may put out of
    reach.
    """
    place = surface.thresholds(limit)
    reach = np.isfinite(place)
    p = skewed_below((np.where(reach, place, 0.0) - mean) / sd, skew)
    return np.where(reach, p, place > 0.0)


def well_meets(
    surface: Surface, moments: Moments, target: Target, wander: Array | float = 0.0
) -> Array:
    """p_well (n,) from the latent law (S, n): one future well on a new plate.

    wander (S, n): latent variance that its setting errors make. Its reading has the common noise;
    the uncertainty that a reading may state of itself is not known beforehand and not added.
    """
    mean, variance, skew = latent_law(moments)
    errors = surface.errors
    more = (errors.inside**2).sum(1)[:, None] + wander
    if surface.link != "logit":
        more = more + errors.noise[:, None] ** 2
    total = variance + more
    law = Latent(mean, total, skew if skew is _NO_SKEW else skew * (variance / total) ** 1.5)
    if surface.link == "logit":
        return _fraction_well(surface, law, target)
    return mean_meets(surface, law, target)


def _fraction_well(surface: Surface, law: Latent, target: Target) -> Array:
    """The reading is (1 + scale) g(f) + noise; scale and noise are Gaussian given f."""
    sd = np.sqrt(law.variance)
    out = np.ones(sd.shape[1])
    fine = sd.max(axis=0) > _FINE_ABOVE
    skew = np.broadcast_to(law.skew, sd.shape)
    for chosen, points in ((fine, _points(len(sd), _FINE)), (~fine, _points(len(sd), _COARSE))):
        size = max(1, _CHUNK // (len(sd) * points[0].shape[-1]))
        columns = np.flatnonzero(chosen)
        for start in range(0, len(columns), size):
            part = columns[start : start + size]
            here = Latent(law.mean[:, part], sd[:, part], skew[:, part])
            met = np.zeros((len(sd), len(part)))
            for limit, sign in ((target.high, 1.0), (target.low, -1.0)):
                met += sign * _reading_below(surface, here, points, limit)
            out[part] = surface.weights @ met
    return np.clip(out, 0.0, 1.0)


def _points(nodes: int, z: Array) -> tuple[Array, Array]:
    """Points of a standard normal, (Q,) for all nodes or one (S, 1, 1) for each of a crowd, and
    their weights.
    """
    if nodes < _CROWD:
        return z, _normal_weights(z)
    from scipy.special import ndtri

    own = ndtri((0.5 + _GOLDEN * np.arange(nodes)) % 1.0)
    return own[:, None, None], np.ones(1)


def _reading_below(
    surface: Surface, law: Latent, points: tuple[Array, Array], limit: float
) -> Array:
    """Probability (S, n) that a reading lies below a limit, summed over points of a standard
    normal; the law with sds in the place of variances.

    The step that a small noise makes of it in f is taken out of the sum by the Gaussian step
    that has the same place and slope, whose average over f is known.
    """
    (mean, sd, skew), (z, weights) = law, points
    if np.isinf(limit):
        return np.full_like(mean, 1.0 if limit > 0.0 else 0.0)
    errors = surface.errors
    ceiling, noise = errors.ceiling[:, None], errors.noise[:, None] ** 2
    scale = (errors.scale**2).sum(1)[:, None]
    place = surface.thresholds(limit)
    slope = slope_of("logit", np.where(np.isfinite(place), place, 0.0), ceiling)
    width = np.sqrt(noise + scale * limit**2) / slope
    spread = np.sqrt(sd**2 + width**2)
    reach = np.isfinite(place)
    step = skewed_below((np.where(reach, place, 0.0) - mean) / spread, skew * (sd / spread) ** 3)
    step = np.where(reach, step, place > 0.0)
    f = mean[..., None] + sd[..., None] * z
    g = mean_of("logit", f, ceiling[..., None])
    below = _below((limit - g) / np.sqrt(noise[..., None] + scale[..., None] * g * g))
    below -= _below((place[..., None] - f) / width[..., None])
    bent = (below * (weights * (z**3 - 3.0 * z))).sum(-1) if skew.any() else 0.0
    return step + below @ weights + skew / 6.0 * bent


def process_mean(surface: Surface, moments: Moments) -> Array:
    """Posterior mean (n,) of the process mean g(f), natural unit."""
    mean, variance, skew = latent_law(moments)
    if surface.link == "identity":
        return np.asarray(surface.weights @ mean)
    if surface.link == "log":
        third = skew * variance**1.5 / 6.0
        return np.asarray(surface.weights @ np.exp(mean + 0.5 * variance + third))
    out = np.zeros(mean.shape[1])
    sd, ceiling = np.sqrt(variance), surface.errors.ceiling[:, None]
    for z, weight in zip(_FINE, _normal_weights(_FINE), strict=True):
        g = mean_of(surface.link, mean + z * sd, ceiling)
        out += weight * (surface.weights @ (g * (1.0 + skew / 6.0 * (z**3 - 3.0 * z))))
    return out


def process_quantile(surface: Surface, moments: Moments, level: float) -> Array:
    """Quantile (n,) of the process mean g(f), natural unit, by bisection on the mixture."""
    mean, variance, skew = latent_law(moments)
    sd, ceiling = np.sqrt(variance), surface.errors.ceiling[:, None]
    low, high = (mean - 8.0 * sd).min(0), (mean + 8.0 * sd).max(0)
    if surface.link == "logit":
        # The bisection runs over logits under a ceiling of 1; a lower ceiling lowers them.
        least = mean_of("logit", np.minimum(mean - 8.0 * sd, 30.0), ceiling)
        low = latent_of("logit", least).min(axis=0)
    for _ in range(50):
        middle = 0.5 * (low + high)
        own = latent_of(surface.link, mean_of(surface.link, middle), ceiling)
        under = surface.weights @ skewed_below((own - mean) / sd, skew) < level
        low, high = np.where(under, middle, low), np.where(under, high, middle)
    return mean_of(surface.link, 0.5 * (low + high))
