"""Gaussian approximation of the latent values by expectation propagation (Minka 2001).

Every latent quantity is a linear map of whitened variables w ~ N(0, I). A cell contributes a
two-dimensional Gaussian site in the pair of its latent value and its scale error; all sites are
updated in parallel with damping, for S hyperparameter nodes at once (Rasmussen & Williams 2006,
section 3.6, in whitened form). For the identity link the sites
are the likelihood itself and one pass is exact.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.tilted import CellLikelihood, Pair, Tilted, tilt

Array = NDArray[np.float64]
_LOG_2PI = float(np.log(2.0 * np.pi))
# Sweeps before settled nodes are set aside; the sum bounds the work on one node.
_STAGES = (4, 3, 4, 6, 10, 20, 40)
_FIRST_STEP, _LEAST_STEP = 0.9, 0.4
_NEWTON_STEPS = 15
# A fixed point is taken as reached below this last move, in sds of a latent value.
_SETTLED = 0.05


@dataclass(frozen=True)
class Rows:
    """Linear maps from w to the pairs of C cells, in the factors that they share.

    root (S, U, R0): latent values from the first whitened variables; latent (C,): the latent
    value of a cell; scale (S, C, G): standardised scale errors from the last G variables, with
    G = 0 where there are none.
    """

    root: Array
    latent: NDArray[np.intp]
    scale: Array

    def nodes(self, index: NDArray[np.intp]) -> Rows:
        """The maps of some nodes."""
        if len(index) == len(self.root):
            return self
        return Rows(self.root[index], self.latent, self.scale[index])

    def gathered(self, cells: Array) -> Array:
        """Sums (S, U, ...) over the cells of each latent value of quantities (S, C, ...)."""
        incidence = np.zeros((self.root.shape[1], len(self.latent)))
        incidence[self.latent, np.arange(len(self.latent))] = 1.0
        return np.tensordot(cells, incidence, axes=(1, 1)) if cells.ndim == 2 else incidence @ cells


@dataclass(frozen=True)
class Sites:
    """Natural parameters (S, C) of the sites: shifts u, s and precisions uu, us, ss."""

    u: Array
    s: Array
    uu: Array
    us: Array
    ss: Array

    def toward(self, other: Sites, step: Array | float) -> Sites:
        """These sites moved the fraction `step` towards the others, given alike in all fields."""
        here, there = vars(self), vars(other)
        return Sites(**{k: here[k] + step * (there[k] - here[k]) for k in here})

    def times(self, factor: Array) -> Sites:
        """The sites raised to the power `factor`, (S, 1) or (S, C)."""
        return Sites(**{k: factor * v for k, v in vars(self).items()})

    def where_finite(self, other: Sites) -> Sites:
        """The sites, with the others' in every cell where a number is not finite."""
        good = np.isfinite(np.stack(list(vars(self).values()))).all(axis=0)
        return Sites(**{k: np.where(good, v, vars(other)[k]) for k, v in vars(self).items()})

    def nodes(self, index: NDArray[np.intp]) -> Sites:
        """The sites of some nodes, repeats allowed."""
        return Sites(**{k: v[index] for k, v in vars(self).items()})

    def replaced(self, index: NDArray[np.intp], new: Sites) -> Sites:
        """The sites with those of some nodes replaced."""
        out = {k: v.copy() for k, v in vars(self).items()}
        for k, v in vars(new).items():
            out[k][index] = v
        return Sites(**out)


@dataclass(frozen=True)
class Approximation:
    """Posterior of w at S nodes: mean (S, R), covariance V (S, R, R); log evidence (S,); the
    sites, the cavity pair and the tilted answer of every cell; numbers of the nodes that have no
    proper fixed point (a noise far smaller than the shared errors) and are Laplace's instead.
    """

    mean: Array
    V: Array
    log_evidence: Array
    sites: Sites
    cavity: Pair
    tilted: Tilted
    laplace: NDArray[np.intp]


def join(parts: Sequence[Approximation]) -> Approximation:
    """The approximations of several groups of nodes as one."""
    if len(parts) == 1:
        return parts[0]
    starts = np.cumsum([0, *(len(p.mean) for p in parts[:-1])])
    tilted = [p.tilted for p in parts]
    return Approximation(
        np.concatenate([p.mean for p in parts]),
        np.concatenate([p.V for p in parts]),
        np.concatenate([p.log_evidence for p in parts]),
        Sites(**_fields([p.sites for p in parts])),
        Pair(**_fields([p.cavity for p in parts])),
        Tilted(
            Pair(**_fields([t.pair for t in tilted])),
            np.concatenate([t.log_z for t in tilted]),
            np.concatenate([t.noise_slope for t in tilted]),
        ),
        np.concatenate([p.laplace + start for p, start in zip(parts, starts, strict=True)]),
    )


def _fields(parts: Sequence[Sites] | Sequence[Pair]) -> dict[str, Array]:
    return {k: np.concatenate([vars(p)[k] for p in parts]) for k in vars(parts[0])}


def approximate(
    rows: Rows, lik: CellLikelihood, start: Sites | None = None, tolerance: float = 1e-3
) -> Approximation:
    """The fixed point of expectation propagation, from `start` or from the Laplace mode.

    tolerance: largest last move of a latent mean, in its sd, or of a log sd.
    """
    if lik.link == "identity":
        return _exact(rows, lik)
    sites = start or laplace_sites(rows, lik)
    change = np.full(len(lik.noise), np.inf)
    active = np.arange(len(change))
    for number, sweeps in enumerate(_STAGES):
        if number == 1 and start is not None:
            lost = active[~(change[active] < 1.0)]
            if len(lost):
                sites = sites.replaced(lost, laplace_sites(rows.nodes(lost), lik.nodes(lost)))
        moved, last = _settle(rows.nodes(active), lik.nodes(active), sites.nodes(active), sweeps)
        sites, change[active] = sites.replaced(active, moved), last
        active = active[~(last < tolerance)]
        if not len(active):
            break
    gaussian = _Gaussian(rows, sites)
    state = _sweep(gaussian, lik, gaussian.pair)
    evidence = gaussian.log_integral() + (state.tilted.log_z - state.log_sites).sum(1)
    failed = np.flatnonzero(~(state.proper & np.isfinite(evidence) & (change < _SETTLED)))
    if len(failed):
        some, few = rows.nodes(failed), lik.nodes(failed)
        sites = gaussian.sites.replaced(failed, laplace_sites(some, few))
        gaussian = _Gaussian(rows, sites)
        state = _sweep(gaussian, lik, gaussian.pair)
        evidence[failed] = _laplace_evidence(gaussian, lik)[failed]
    return Approximation(
        gaussian.mean, gaussian.V, evidence, sites, state.cavity, state.tilted, failed
    )


def _laplace_evidence(gaussian: _Gaussian, lik: CellLikelihood) -> Array:
    """Laplace's evidence (S,) where the sites are the likelihood linearised at the mode."""
    t, p = gaussian.sites, gaussian.pair
    v = lik.reading_variance / lik.count
    residual = lik.mean - (1.0 + lik.scale * p.s) * lik.process_mean(p.u)
    log_like = -0.5 * (residual**2 / v + np.log(v) + _LOG_2PI) + lik.log_within()
    curved = t.uu * p.u**2 + 2.0 * t.us * p.u * p.s + t.ss * p.s**2
    return gaussian.log_integral() + (log_like + 0.5 * curved - t.u * p.u - t.s * p.s).sum(1)


def laplace_sites(rows: Rows, lik: CellLikelihood) -> Sites:
    """Sites of the likelihood linearised at the posterior mode (Gauss-Newton), never negative."""
    inner = np.clip(lik.mean, 0.03, 0.97)
    shape = lik.reading_variance.shape
    u = np.broadcast_to(np.log(inner / (1.0 - inner)) - lik.offset, shape)
    s = np.zeros(shape)
    for _ in range(_NEWTON_STEPS):
        sites = _linearised(lik, u, s)
        pair = _Gaussian(rows, sites).pair
        move = np.clip(pair.u - u, -1.5, 1.5)
        u, s = u + move, pair.s
        if np.abs(move).max(initial=0.0) < 0.02:
            break
    return _linearised(lik, u, s)


def _linearised(lik: CellLikelihood, u: Array, s: Array) -> Sites:
    """Sites of y = mean + J_u (u' - u) + J_s (s' - s), the reading linearised at u, s (S, C)."""
    g = lik.process_mean(u)
    by_u, by_s = (1.0 + lik.scale * s) * g * (1.0 - g), lik.scale * g
    precision = lik.count / lik.reading_variance
    target = lik.mean - (1.0 + lik.scale * s) * g + by_u * u + by_s * s
    return Sites(
        precision * by_u * target,
        precision * by_s * target,
        precision * by_u**2,
        precision * by_u * by_s,
        precision * by_s**2,
    )


def _settle(rows: Rows, lik: CellLikelihood, sites: Sites, sweeps: int) -> tuple[Sites, Array]:
    """A number of parallel sweeps; nodes whose moves grow are damped. Returns the last move."""
    gaussian = _Gaussian(rows, sites)
    base = gaussian.pair
    step = np.full((len(lik.noise), 1), _FIRST_STEP)
    last = np.full(len(step), np.inf)
    for _ in range(sweeps):
        state = _sweep(gaussian, lik, base)
        moved = _Gaussian(rows, gaussian.sites.toward(state.proposed, step))
        change = _change(gaussian.pair, moved.pair) / step[:, 0]
        factor = np.where(change > last, 0.6, 1.3)[:, None]
        step = np.clip(factor * step, _LEAST_STEP, _FIRST_STEP)
        gaussian, base, last = moved, state.tilted.pair, change
    return gaussian.sites, last


class _Gaussian:
    """N(0, I) in w times the sites, made positive definite where the sites are not."""

    def __init__(self, rows: Rows, sites: Sites) -> None:
        self.rows, self.sites = rows, sites
        M = self._precision()
        try:
            C = np.linalg.cholesky(M)
        except np.linalg.LinAlgError:
            bad = np.flatnonzero(~(np.linalg.eigvalsh(M)[:, 0] > 0.0))
            self.sites = sites.replaced(bad, _non_negative(sites.nodes(bad)))
            M = self._precision()
            C = np.linalg.cholesky(M)
        self.log_det = 2.0 * np.log(np.diagonal(C, axis1=1, axis2=2)).sum(1)
        self.V: Array = np.asarray(np.linalg.inv(M), dtype=float)
        self.mean = (self.V @ self.shift[..., None])[..., 0]
        self.pair = self._pair()

    def _precision(self) -> Array:
        """I plus the sites, in w, by blocks; sets the shift."""
        root, scale, t = self.rows.root, self.rows.scale, self.sites
        turned = np.swapaxes(root, 1, 2)
        gathered = self.rows.gathered
        own = root.shape[2]
        M = np.empty((len(root), own + scale.shape[2], own + scale.shape[2]))
        M[:, :own, :own] = turned @ (gathered(t.uu)[..., None] * root)
        M[:, :own, own:] = turned @ gathered(t.us[..., None] * scale)
        M[:, own:, :own] = np.swapaxes(M[:, :own, own:], 1, 2)
        M[:, own:, own:] = np.swapaxes(scale, 1, 2) @ (t.ss[..., None] * scale)
        index = np.arange(M.shape[-1])
        M[:, index, index] += 1.0
        shift_u = (turned @ gathered(t.u)[..., None])[..., 0]
        shift_s = np.einsum("scg,sc->sg", scale, t.s)
        self.shift = np.concatenate([shift_u, shift_s], axis=1)
        return M

    def _pair(self) -> Pair:
        root, scale, latent = self.rows.root, self.rows.scale, self.rows.latent
        own = root.shape[2]
        mean_u = (root @ self.mean[:, :own, None])[..., 0][:, latent]
        uu = np.einsum("sur,sur->su", root @ self.V[:, :own, :own], root)[:, latent]
        if not scale.shape[2]:
            zero = np.zeros_like(uu)
            return Pair(mean_u, zero, uu, zero, np.ones_like(uu))
        mean_s = (scale @ self.mean[:, own:, None])[..., 0]
        us = ((root @ self.V[:, :own, own:])[:, latent] * scale).sum(-1)
        ss = ((scale @ self.V[:, own:, own:]) * scale).sum(-1)
        return Pair(mean_u, mean_s, uu, us, ss)

    def log_integral(self) -> Array:
        """ln of the integral (S,) of N(w; 0, I) times the unnormalised sites."""
        return 0.5 * (self.shift * self.mean).sum(1) - 0.5 * self.log_det


@dataclass(frozen=True)
class _Sweep:
    cavity: Pair
    tilted: Tilted
    proposed: Sites
    log_sites: Array
    proper: NDArray[np.bool_]


def _sweep(gaussian: _Gaussian, lik: CellLikelihood, base: Pair) -> _Sweep:
    """Cavities, tilted moments and the sites that would match them; quadrature placed at base."""
    cavity, proper = _divide(gaussian.pair, gaussian.sites)
    tilted = tilt(lik, cavity, base.u, np.sqrt(base.uu))
    proposed = _minus(_natural(tilted.pair), _natural(cavity)).where_finite(gaussian.sites)
    # A reading cannot tell more of its logit than 1/4 of a reading's precision; far above that
    # the quadrature has lost the law, and the site is held back.
    most = 0.25 * lik.count / lik.reading_variance
    proposed = proposed.times(np.minimum(1.0, most / np.maximum(proposed.uu, 1e-300)))
    return _Sweep(cavity, tilted, proposed, _log_product(gaussian.pair, cavity), proper)


def _natural(p: Pair) -> Sites:
    """Natural parameters of N(mean, covariance) of the pairs."""
    det = p.uu * p.ss - p.us**2
    uu, us, ss = p.ss / det, -p.us / det, p.uu / det
    return Sites(uu * p.u + us * p.s, us * p.u + ss * p.s, uu, us, ss)


def _minus(a: Sites, b: Sites) -> Sites:
    left, right = vars(a), vars(b)
    return Sites(**{k: left[k] - right[k] for k in left})


def _divide(p: Pair, sites: Sites) -> tuple[Pair, NDArray[np.bool_]]:
    """Cavity: the pair less its own site, kept proper; and whether (S,) it was so unaided."""
    n = _minus(_natural(p), sites)
    uu, ss = np.maximum(n.uu, 1e-9 / p.uu), np.maximum(n.ss, 1e-9 / p.ss)
    rim = np.sqrt(0.9999 * uu * ss)
    us = np.clip(n.us, -rim, rim)
    proper = ((n.uu == uu) & (n.ss == ss) & (n.us == us)).all(axis=1)
    det = uu * ss - us**2
    u, s = (ss * n.u - us * n.s) / det, (uu * n.s - us * n.u) / det
    return Pair(u, s, ss / det, -us / det, uu / det), proper


def _quadratic_form(p: Pair) -> Array:
    n = _natural(p)
    return n.u * p.u + n.s * p.s


def _log_product(posterior: Pair, cavity: Pair) -> Array:
    """ln of the integral (S, C) of a cavity times its unnormalised site."""
    det = posterior.uu * posterior.ss - posterior.us**2
    det_cavity = cavity.uu * cavity.ss - cavity.us**2
    form = _quadratic_form(posterior) - _quadratic_form(cavity)
    return 0.5 * (np.log(det) - np.log(det_cavity) + form)


def _change(old: Pair, new: Pair) -> Array:
    """Largest move (S,) of a latent mean in sds, or of a log sd."""
    uu = np.maximum(new.uu, 1e-300)
    shift = np.abs(new.u - old.u) / np.sqrt(uu)
    spread = 0.5 * np.abs(np.log(uu / np.maximum(old.uu, 1e-300)))
    return np.maximum(shift, spread).max(axis=1, initial=0.0)


def _non_negative(sites: Sites) -> Sites:
    """The sites with negative precisions taken out, which keeps every Gaussian proper."""
    uu, ss = np.maximum(sites.uu, 0.0), np.maximum(sites.ss, 0.0)
    us = np.clip(sites.us, -np.sqrt(uu * ss), np.sqrt(uu * ss))
    return replace(sites, uu=uu, us=us, ss=ss)


def _exact(rows: Rows, lik: CellLikelihood) -> Approximation:
    """The identity link: the sites are the likelihood, the answer is exact."""
    v = lik.reading_variance / lik.count
    y = np.broadcast_to(lik.mean - lik.offset, v.shape)
    zero = np.zeros_like(v)
    sites = Sites(y / v, zero, 1.0 / v, zero, zero)
    gaussian = _Gaussian(rows, sites)
    post = gaussian.pair
    # Readings that lie on the surface to rounding leave nothing to a cell's own noise.
    left = np.maximum(1.0 - post.uu / v, 1e-12)
    spread = post.uu / left
    cavity = Pair((post.u - post.uu * y / v) / left, zero, spread, zero, np.ones_like(v))
    total = spread + v
    log_z = -0.5 * ((y - cavity.u) ** 2 / total + np.log(total) + _LOG_2PI) + lik.log_within()
    misfit = ((y - post.u) ** 2 + post.uu) / v**2 - 1.0 / v
    rv = lik.reading_variance
    about = (lik.within / rv - (lik.count - 1.0)) / rv
    tilted = Tilted(post, log_z, lik.noise * (misfit / lik.count + about))
    own = -0.5 * (y**2 / v + np.log(v) + _LOG_2PI) + lik.log_within()
    evidence = gaussian.log_integral() + own.sum(1)
    none = np.zeros(0, dtype=np.intp)
    return Approximation(gaussian.mean, gaussian.V, evidence, sites, cavity, tilted, none)
