"""One cell at a time: moments of a Gaussian cavity times the exact likelihood of the cell.

The pair of a cell is (u, s): the centred latent value and the standardised scale error. Given u
the reading is linear in s, so s is integrated in closed form and u by Gauss-Hermite quadrature.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.links import Link, mean_of

Array = NDArray[np.float64]
_LOG_2PI = float(np.log(2.0 * np.pi))
_ABSCISSAE, _WEIGHTS = np.polynomial.hermite_e.hermegauss(32)
# The quadrature is a little wider than the law it integrates, for tails that are not Gaussian.
_WIDEN = 1.2
_PLACEMENTS = 25
_LOG_WEIGHTS = np.log(_WEIGHTS) + 0.5 * _ABSCISSAE**2


@dataclass(frozen=True)
class Pair:
    """Means u, s and covariances uu, us, ss of the pairs, each (S, C)."""

    u: Array
    s: Array
    uu: Array
    us: Array
    ss: Array


@dataclass(frozen=True, kw_only=True)
class CellLikelihood:
    """Likelihood of the cells at S nodes.

    link; offset: prior mean of the latent level; mean, count, within, variance (C,) as in Cells;
    noise (S, 1): variance of a reading; scale (S, 1): sd of the summed scale errors; ceiling
    (S, 1): where a fraction levels off.
    """

    link: Link
    offset: float
    mean: Array
    count: Array
    within: Array
    variance: Array
    noise: Array
    scale: Array
    ceiling: Array

    def nodes(self, index: NDArray[np.intp]) -> CellLikelihood:
        """The likelihood of some nodes."""
        return replace(
            self,
            noise=self.noise[index],
            scale=self.scale[index],
            ceiling=self.ceiling[index],
        )

    @property
    def reading_variance(self) -> Array:
        """Variance (S, C) of one reading about the process mean and the shared errors."""
        return self.noise + self.variance

    def log_within(self) -> Array:
        """Log density (S, C) of what the cell mean leaves out: the spread about it."""
        v, extra = self.reading_variance, self.count - 1.0
        spread = -0.5 * self.within / v - 0.5 * extra * (np.log(v) + _LOG_2PI)
        return spread - 0.5 * np.log(self.count)

    def process_mean(self, u: Array) -> Array:
        """g at centred latent values u, (S, C) or (S, C, Q)."""
        ceiling = self.ceiling if u.ndim == 2 else self.ceiling[..., None]
        return mean_of(self.link, u + self.offset, ceiling)


@dataclass(frozen=True)
class Tilted:
    """Moments of the tilted pairs, log normaliser (S, C), and its slopes (S, C) in ln noise sd and
    in ln ceiling.
    """

    pair: Pair
    log_z: Array
    noise_slope: Array
    ceiling_slope: Array


def tilt(lik: CellLikelihood, cavity: Pair, start_u: Array, start_sd: Array) -> Tilted:
    """Tilted moments; quadrature placed at start_u, start_sd (S, C), and moved until it fits."""
    return place(lik, cavity, start_u, start_sd).moments(lik)


def place(lik: CellLikelihood, cavity: Pair, start_u: Array, start_sd: Array) -> Points:
    """Quadrature points that cover each tilted law, searched from start_u, start_sd (S, C)."""
    centre, spread = start_u, np.maximum(_WIDEN * start_sd, 1e-8)
    for _ in range(_PLACEMENTS):
        points = Points(lik, cavity, centre, spread)
        shift = np.abs(points.mean_u - centre) / spread
        ratio = points.sd_u / spread
        if np.all((shift < 1.0) & (ratio > 0.4) & (ratio < 1.2)):
            break
        # Mass at the rim says where to go, not how wide: widen there, else follow the answer.
        factor = np.where(shift > 3.0, 1.5, np.clip(_WIDEN * ratio, 0.3, 3.0))
        centre, spread = points.mean_u, factor * spread
    return points


class Points:
    """Quadrature points of u for every cell and the conditional law of s on them."""

    def __init__(self, lik: CellLikelihood, cavity: Pair, centre: Array, spread: Array) -> None:
        self.u = centre[..., None] + spread[..., None] * _ABSCISSAE
        away = self.u - cavity.u[..., None]
        slope = (cavity.us / cavity.uu)[..., None]
        self.s_mean = cavity.s[..., None] + slope * away
        self.s_var = (cavity.ss - cavity.us**2 / cavity.uu)[..., None]
        g = lik.process_mean(self.u)
        h = lik.scale[..., None]
        self.loading = h * g
        self.cell_variance = (lik.reading_variance / lik.count)[..., None]
        self.total = self.cell_variance + self.loading**2 * self.s_var
        self.residual = lik.mean[:, None] - g - self.loading * self.s_mean
        log_like = -0.5 * (self.residual**2 / self.total + np.log(self.total) + _LOG_2PI)
        log_cavity = -0.5 * (away**2 / cavity.uu[..., None] + np.log(cavity.uu)[..., None])
        log_w = log_like + log_cavity + _LOG_WEIGHTS + np.log(spread)[..., None] - 0.5 * _LOG_2PI
        top = log_w.max(-1, keepdims=True)
        w = np.exp(log_w - top)
        mass = w.sum(-1, keepdims=True)
        self.w = w / mass
        self.log_z = (top + np.log(mass))[..., 0]
        self.mean_u = (self.w * self.u).sum(-1)
        variance = (self.w * (self.u - self.mean_u[..., None]) ** 2).sum(-1)
        self.sd_u = np.sqrt(np.maximum(variance, 1e-16))

    def scale_given(self) -> tuple[Array, Array]:
        """Mean and variance (S, C, Q) of s given u and the reading."""
        gain = self.loading * self.s_var / self.total
        return self.s_mean + gain * self.residual, self.s_var * (1.0 - gain * self.loading)

    def moments(self, lik: CellLikelihood) -> Tilted:
        """Tilted moments of the pairs."""
        s_given, v_given = self.scale_given()
        s = (self.w * s_given).sum(-1)
        du, ds = self.u - self.mean_u[..., None], s_given - s[..., None]
        pair = Pair(
            u=self.mean_u,
            s=s,
            uu=self.sd_u**2,
            us=(self.w * du * ds).sum(-1),
            ss=(self.w * (ds**2 + v_given)).sum(-1),
        )
        v, n = lik.reading_variance, lik.count
        misfit = (self.w * (self.residual**2 / self.total**2 - 1.0 / self.total)).sum(-1)
        about = (lik.within / v - (n - 1.0)) / v
        centre = lik.mean[:, None] - self.residual
        by_spread = (self.residual**2 / self.total - 1.0) * self.loading**2 * self.s_var
        by_ceiling = (self.w * (self.residual * centre + by_spread) / self.total).sum(-1)
        log_z = self.log_z + lik.log_within()
        return Tilted(pair, log_z, lik.noise * (misfit / n + about), by_ceiling)
