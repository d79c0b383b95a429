"""One cell at a time: moments of a Gaussian cavity times the exact likelihood of the cell.

The pair of a cell is (u, s): the centred latent value and the standardised scale error. Given u
the reading is linear in s, so s is integrated in closed form and u by Gauss-Hermite quadrature.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.links import Link, mean_of, slope_of

Array = NDArray[np.float64]
_LOG_2PI = float(np.log(2.0 * np.pi))
_ABSCISSAE, _WEIGHTS = np.polynomial.hermite_e.hermegauss(32)
# The quadrature is a little wider than the law it integrates, for tails that are not Gaussian.
_WIDEN = 1.2
_PLACEMENTS = 25
_LOG_WEIGHTS = np.log(_WEIGHTS) + 0.5 * _ABSCISSAE**2


class Rule(NamedTuple):
    """Gauss-Hermite abscissae and log weights (Q,), the normal density taken out."""

    abscissae: Array
    log_weights: Array

    @property
    def powers(self) -> Array:
        """The abscissae and their squares (Q, 2)."""
        return np.stack([self.abscissae, self.abscissae**2], axis=1)


def rule_of(points: int) -> Rule:
    """The rule with so many points."""
    x, w = np.polynomial.hermite_e.hermegauss(points)
    return Rule(x, np.log(w) + 0.5 * x**2)


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

    link; offset: prior mean of the latent level; mean, count, within, variance, censored (C,) as in
    Cells; wander (C,): latent variance of one reading that its setting errors make; noise (S, 1):
    variance of a reading; scale (S, 1): sd of the summed scale errors; ceiling (S, 1): where a
    fraction levels off.
    """

    link: Link
    offset: float
    mean: Array
    count: Array
    within: Array
    variance: Array
    censored: NDArray[np.intp]
    wander: Array
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

    def flat(self, chosen: NDArray[np.bool_]) -> CellLikelihood:
        """The likelihood of the cells chosen (S, C), each at its node, as those of one node."""
        cell = np.nonzero(chosen)[1]
        noise, scale, ceiling = (
            np.broadcast_to(v, chosen.shape)[chosen][None]
            for v in (self.noise, self.scale, self.ceiling)
        )
        return replace(
            self,
            mean=self.mean[cell],
            count=self.count[cell],
            within=self.within[cell],
            variance=self.variance[cell],
            censored=self.censored[cell],
            wander=self.wander[cell],
            noise=noise,
            scale=scale,
            ceiling=ceiling,
        )

    @property
    def base_variance(self) -> Array:
        """Variance (S, C) of one reading but for its setting errors."""
        return self.noise + self.variance

    def wandering(self, u: Array) -> Array:
        """Variance that setting errors add to one reading at centred latent values u, (S, C) or
        (S, C, Q): g'(u)^2 wander (McHutchon & Rasmussen 2011, eq. 5).
        """
        wander = self.wander if u.ndim == 2 else self.wander[:, None]
        if not self.wander.any():
            return np.zeros(1)
        return self.slope(u) ** 2 * wander

    def reading_variance(self, u: Array) -> Array:
        """Variance of one reading about the process mean and the shared errors, at centred latent
        values u, (S, C) or (S, C, Q); of a shape that broadcasts with u.
        """
        base = self.base_variance if u.ndim == 2 else self.base_variance[..., None]
        return base + self.wandering(u)

    def log_within(self, u: Array) -> Array:
        """Log density of what the cell mean leaves out, the spread about it, at u as above."""
        v, n, within = self.reading_variance(u), self.count, self.within
        if u.ndim == 3:
            n, within = n[:, None], within[:, None]
        return -0.5 * (within / v + (n - 1.0) * (np.log(v) + _LOG_2PI) + np.log(n))

    def process_mean(self, u: Array) -> Array:
        """g at centred latent values u, (S, C) or (S, C, Q)."""
        return mean_of(self.link, u + self.offset, self._ceiling(u))

    def slope(self, u: Array) -> Array:
        """g' at centred latent values u, (S, C) or (S, C, Q)."""
        return slope_of(self.link, u + self.offset, self._ceiling(u))

    def log_density(self, u: Array, s: Array) -> Array:
        """Log density (S, C) of the readings of each cell given its pair (S, C)."""
        v = self.reading_variance(u) / self.count
        residual = self.mean - (1.0 + self.scale * s) * self.process_mean(u)
        return _log_reading(residual, v, self.censored) + self.log_within(u)

    def _ceiling(self, u: Array) -> Array:
        return self.ceiling if u.ndim == 2 else self.ceiling[..., None]


def _average(w: Array, values: Array) -> Array:
    """Average (S, C) over the quadrature points."""
    return np.asarray(np.einsum("scq,scq->sc", w, values))


def _log_reading(residual: Array, variance: Array, censored: NDArray[np.intp]) -> Array:
    """Log density of a residual, or log probability that it lies on the censored side."""
    out = -0.5 * (residual**2 / variance + np.log(variance) + _LOG_2PI)
    if censored.any():
        from scipy.special import log_ndtr

        out = np.where(censored == 0, out, log_ndtr(-censored * residual / np.sqrt(variance)))
    return out


@dataclass(frozen=True)
class Pull:
    """How a reading draws on its mean: score, the slope of its log density in the mean, and
    precision, the curvature, both of the shape of the residual.
    """

    score: Array
    precision: Array


def pull_of(residual: Array, variance: Array, censored: NDArray[np.intp]) -> Pull:
    """The pull of readings; for a censored one that of the normal distribution function."""
    score, precision = residual / variance, 1.0 / variance + np.zeros_like(residual)
    if censored.any():
        from scipy.special import log_ndtr

        sd = np.sqrt(variance)
        z = -censored * residual / sd
        hazard = np.exp(-0.5 * (z**2 + _LOG_2PI) - log_ndtr(z))
        score = np.where(censored == 0, score, censored * hazard / sd)
        precision = np.where(censored == 0, precision, hazard * (z + hazard) / variance)
    return Pull(score, precision)


@dataclass(frozen=True)
class Tilted:
    """Moments of the tilted pairs, their third central moments uuu, uus, uss, sss (S, C, 4), log
    normaliser (S, C), and its slopes (S, C) in ln noise sd and in ln ceiling.
    """

    pair: Pair
    third: Array
    log_z: Array
    noise_slope: Array
    ceiling_slope: Array


def tilt(lik: CellLikelihood, cavity: Pair, start_u: Array, start_sd: Array) -> Tilted:
    """Tilted moments; quadrature placed at start_u, start_sd (S, C), and moved until it fits."""
    return place(lik, cavity, start_u, start_sd).moments(lik)


def place(
    lik: CellLikelihood, cavity: Pair, start_u: Array, start_sd: Array, rule: Rule | None = None
) -> Points:
    """Quadrature points that cover each tilted law, searched from start_u, start_sd (S, C).

    A cell whose points fit is left alone, so that its answer does not hang on its company. rule:
    another than the fine one.
    """
    rule = rule or Rule(_ABSCISSAE, _LOG_WEIGHTS)
    spread = np.maximum(_WIDEN * start_sd, 1e-8)
    points = Points(lik, cavity, start_u, spread, rule)
    astray = ~_fits(*_fit(points, start_u, spread))
    if not astray.any():
        return points
    some, few = lik.flat(astray), Pair(**{k: v[astray][None] for k, v in vars(cavity).items()})
    centre, spread = start_u[astray][None], spread[astray][None]
    mean_u, sd_u = points.mean_u[astray][None], points.sd_u[astray][None]
    for _ in range(_PLACEMENTS):
        shift, ratio = np.abs(mean_u - centre) / spread, sd_u / spread
        lost = ~_fits(shift, ratio)
        if not lost.any():
            break
        # Mass at the rim says where to go, not how wide: widen there, else follow the answer.
        factor = np.where(shift > 3.0, 1.5, np.clip(_WIDEN * ratio, 0.3, 3.0))
        centre, spread = np.where(lost, mean_u, centre), np.where(lost, factor * spread, spread)
        moved = Points(some, few, centre, spread, rule)
        mean_u, sd_u = moved.mean_u, moved.sd_u
    points.put(astray, moved)
    return points


def _fit(points: Points, centre: Array, spread: Array) -> tuple[Array, Array]:
    """How far, in spreads, the law lies from the points' centre, and how wide it is for them."""
    return np.abs(points.mean_u - centre) / spread, points.sd_u / spread


def _fits(shift: Array, ratio: Array) -> NDArray[np.bool_]:
    return (shift < 0.4) & (ratio > 0.6) & (ratio < 1.05)


class Points:
    """Quadrature points of u for every cell and the conditional law of s on them."""

    def __init__(
        self, lik: CellLikelihood, cavity: Pair, centre: Array, spread: Array, rule: Rule
    ) -> None:
        self.u = centre[..., None] + spread[..., None] * rule.abscissae
        away = self.u - cavity.u[..., None]
        slope = (cavity.us / cavity.uu)[..., None]
        self.s_mean = cavity.s[..., None] + slope * away
        self.s_var = (cavity.ss - cavity.us**2 / cavity.uu)[..., None]
        g = lik.process_mean(self.u)
        self.loading = lik.scale[..., None] * g
        self.centre = g + self.loading * self.s_mean
        self.reading_variance = lik.reading_variance(self.u)
        spared = self.reading_variance / lik.count[:, None]
        self.total = spared + self.loading**2 * self.s_var
        self.residual = lik.mean[:, None] - self.centre
        self.censored = lik.censored[:, None]
        log_w = _log_reading(self.residual, self.total, self.censored)
        log_w -= 0.5 * away * away / cavity.uu[..., None]
        constant = lik.log_within(self.u) - 0.5 * (np.log(cavity.uu) + _LOG_2PI)[..., None]
        log_w += constant + np.log(spread)[..., None] + rule.log_weights
        top = log_w.max(-1, keepdims=True)
        self.w = np.exp(log_w - top)
        mass = self.w.sum(-1, keepdims=True)
        self.w /= mass
        self.log_z = (top + np.log(mass))[..., 0]
        x, xx = np.moveaxis(self.w @ rule.powers, -1, 0)
        self.mean_u = centre + spread * x
        self.sd_u = np.sqrt(np.maximum(spread**2 * (xx - x * x), 1e-16))

    def put(self, chosen: NDArray[np.bool_], moved: Points) -> None:
        """Take over the points of `moved`, of one node, for the cells chosen (S, C)."""
        for name, value in vars(self).items():
            if name != "censored":
                value[chosen] = getattr(moved, name)[0]

    def scale_given(self, pull: Pull) -> tuple[Array, Array]:
        """Mean and variance (S, C, Q) of s given u and the reading."""
        gain = self.loading * self.s_var
        return self.s_mean + gain * pull.score, self.s_var - gain**2 * pull.precision

    def pair(self) -> Pair:
        """Mean and covariance (S, C) of the pairs."""
        s_given, v_given = self.scale_given(pull_of(self.residual, self.total, self.censored))
        s = _average(self.w, s_given)
        s_given -= s[..., None]
        us = _average(self.w, (self.u - self.mean_u[..., None]) * s_given)
        ss = _average(self.w, s_given * s_given + v_given)
        return Pair(self.mean_u, s, self.sd_u**2, us, ss)

    def moments(self, lik: CellLikelihood) -> Tilted:
        """Tilted moments of the pairs, and slopes of the log normaliser."""
        pull, pair = pull_of(self.residual, self.total, self.censored), self.pair()
        s_given, v_given = self.scale_given(pull)
        du, ds = self.u - pair.u[..., None], s_given - pair.s[..., None]
        wu, ws = self.w * du, self.w * ds
        powers = (wu * du * du, wu * du * ds, wu * (ds**2 + v_given), ws * (ds**2 + 3.0 * v_given))
        third = [p.sum(-1) for p in powers]
        n, rv = lik.count[:, None], self.reading_variance
        # Slope of the log density in its variance, of the mean and of the spread about it.
        if self.censored.any():
            plain = pull.score**2 - pull.precision
            bent = pull.score * self.residual / self.total
            by_mean = np.where(self.censored == 0, plain, bent)
        else:
            by_mean = pull.score**2 - pull.precision
        by_spread = (lik.within[:, None] / rv - (n - 1.0)) / rv
        by_noise = (self.w * (by_mean / n + by_spread)).sum(-1)
        wandering = lik.wandering(self.u)
        moved = self.loading**2 * self.s_var * by_mean + wandering * (by_mean / n + by_spread)
        by_ceiling = (self.w * (pull.score * self.centre + moved)).sum(-1)
        return Tilted(pair, np.stack(third, axis=-1), self.log_z, lik.noise * by_noise, by_ceiling)
