"""Predictions of a group of cells, such as a plate, from all others, without refitting.

At fixed hyperparameters the sites of the group are divided out of the Gaussian, which leaves the
law of its latent values and shared errors given the rest; nodes are reweighted by
1 / p(y_group | rest, theta), as leave-one-out does for a single reading (Gelfand, Dey & Chang
1992; Vehtari, Gelman & Gabry 2017, section 2).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.cells import Cells
from muntin.surrogate.evidence import Model
from muntin.surrogate.hyperparameters import Posterior, integrate
from muntin.surrogate.links import latent_of
from muntin.surrogate.pareto import tail_shape
from muntin.surrogate.propagation import Approximation
from muntin.surrogate.sites import Rows, Sites, natural
from muntin.surrogate.tilted import CellLikelihood, Pair
from muntin.surrogate.weights import tempered

Array = NDArray[np.float64]
# Nodes of a fit without a plate.
_NODES = 64
Index = NDArray[np.intp]
# Trapezoid points of a standard normal, over which a latent value is averaged.
_Z = np.linspace(-3.6, 3.6, 13)
# Nodes of less than e^-12 of the largest weight never come to matter.
_SPAN = 12.0
# Sd of a process mean, in shares of the usual range, up to which the others tell it.
TOLD = 0.06
_W = np.exp(-0.5 * _Z**2) / np.exp(-0.5 * _Z**2).sum()


@dataclass(frozen=True)
class GroupOut:
    """A group of readings as the others predict them.

    pit (n,): probability integral transform of each reading; NaN where it is censored, and where
    the others hardly tell the process mean, so that the prior would be judged and not the group.
    likeness: mean correlation between the predictive errors of two cells. shift: how far the
    group's readings lie off together, as a share of their level for a fraction, else in the unit of
    y; shift_pit: its transform. ess: effective number of the reweighted nodes. trusted: whether
    their weights can be relied on.
    """

    pit: Array
    likeness: float
    shift: float
    shift_pit: float
    ess: float
    trusted: bool


@dataclass(frozen=True)
class Ahead:
    """Law at S nodes of the latent values and shared errors of a group given the rest.

    cells (m,): its cells. latent (m,): place of each cell's latent value among the first L of the
    mean (S, L + G) and covariance (S, L + G, L + G); loads (S, m, G): how each cell's summed scale
    error is made of the last G. log_density (S,): log p(y_group | rest, theta). proper (S,):
    whether the law is one.
    """

    cells: Index
    latent: Index
    mean: Array
    covariance: Array
    loads: Array
    log_density: Array
    proper: NDArray[np.bool_]


def leave_group_out(
    model: Model, posterior: Posterior, readings: Index, within: float = TOLD
) -> GroupOut:
    """Predictions of some readings (n,) from those of other cells, over the nodes of a fit.

    within: sd of a process mean, in shares of the usual range, up to which the others tell it.

    Where few nodes would carry the new weights they are tempered, so that the group keeps a say.
    """
    evidence, cells = posterior.evidence, np.unique(model.cells.cell[readings])
    carrying = np.flatnonzero(posterior.log_weights > posterior.log_weights.max() - _SPAN)
    lik = model.likelihood(evidence.theta[carrying])
    rows = model.rows(evidence.theta[carrying], evidence.root[carrying])
    ahead = predict_ahead(rows, evidence.approximation, carrying, cells)
    log_w, trusted = _without(posterior.log_weights[carrying], ahead)
    return _summary(model, readings, lik, ahead, np.exp(log_w), trusted, within)


def refit_group_out(model: Model, seed: int, readings: Index, within: float = TOLD) -> GroupOut:
    """The same over the nodes of a fit of the others alone."""
    cells = np.unique(model.cells.cell[readings])
    posterior = integrate(silent(model, cells), seed, _NODES)
    evidence = posterior.evidence
    every = np.arange(len(evidence.theta))
    lik = model.likelihood(evidence.theta)
    rows = model.rows(evidence.theta, evidence.root)
    ahead = predict_ahead(rows, evidence.approximation, every, cells)
    weights = np.exp(posterior.log_weights)
    return _summary(model, readings, lik, ahead, weights, True, within)


def _without(log_weights: Array, ahead: Ahead) -> tuple[Array, bool]:
    """Normalised log weights (S,) of the nodes without the group, and whether to trust them."""
    use = ahead.proper if ahead.proper.any() else np.ones(len(log_weights), dtype=bool)
    own = np.where(use, log_weights, -np.inf)
    factor = np.where(use, -ahead.log_density, 0.0)
    moved, power = tempered(own, factor)
    return moved, power == 1.0 and tail_shape((own + factor)[use]) < 0.7


def silent(model: Model, cells: Index) -> Model:
    """The model with readings of `cells` (m,) that tell nothing: their known variance is huge."""
    own = model.cells
    span = max(float(np.ptp(own.y)) if len(own.y) else 1.0, 1e-12)
    variance, within = own.variance.copy(), own.within.copy()
    variance[cells] = (1e4 * span) ** 2
    within[cells] = 0.0
    return replace(model, cells=replace(own, variance=variance, within=within))


def predict_ahead(rows: Rows, approx: Approximation, nodes: Index, cells: Index) -> Ahead:
    """The law of a group's latent values and scale errors without the group's sites.

    rows: of the `nodes` (S,) of the approximation.
    With the posterior N(mu, S) of x and the sites exp(t'x - x'Tx/2) of the group, the law without
    them has the covariance (I - S T)^-1 S and the mean (I - S T)^-1 (mu - S t).
    """
    latents, latent = np.unique(rows.latent[cells], return_inverse=True)
    loads, own = rows.scale[:, cells], rows.root.shape[2]
    root = rows.root[:, latents]
    w = approx.mean[nodes]
    mu = np.concatenate([(root @ w[:, :own, None])[..., 0], w[:, own:]], axis=1)
    S = _joint(root, approx.V[nodes], own)
    sites = {k: v[np.ix_(nodes, cells)] for k, v in vars(approx.sites).items()}
    T, t = _group_sites(loads, latent, len(latents), Sites(**sites))
    left = np.eye(S.shape[-1]) - S @ T
    solved = np.linalg.solve(
        left, np.concatenate([S, (mu - (S @ t[..., None])[..., 0])[..., None]], 2)
    )
    C, mean = 0.5 * (solved[..., :-1] + np.swapaxes(solved[..., :-1], 1, 2)), solved[..., -1]
    sign, log_det = np.linalg.slogdet(left)
    bent = t - (T @ mu[..., None])[..., 0]
    log_integral = 0.5 * ((mean * bent).sum(1) + (mu * t).sum(1) + log_det)
    log_density = log_integral + _site_constants(approx, nodes, cells).sum(1)
    prior = (root**2).sum(2)
    wide = np.diagonal(C, axis1=1, axis2=2)[:, : len(latents)] > 1.001 * prior + 1e-9
    proper = (sign > 0) & ~wide.any(1) & np.isfinite(log_density) & _definite(C)
    return Ahead(cells, latent, mean, C, loads, log_density, proper)


def _definite(C: Array) -> NDArray[np.bool_]:
    """Whether (S,) the covariances (S, R, R) are such, but for rounding."""
    index = np.arange(C.shape[-1])
    shored = C.copy()
    shored[:, index, index] += 1e-9
    try:
        np.linalg.cholesky(shored)
    except np.linalg.LinAlgError:
        return np.asarray(np.linalg.eigvalsh(shored)[:, 0] > 0.0)
    return np.ones(len(C), dtype=bool)


def _joint(root: Array, V: Array, own: int) -> Array:
    """Covariance (S, L + G, L + G) of latent values, root (S, L, R), and the scale errors."""
    latents, groups = root.shape[1], V.shape[-1] - own
    S = np.empty((len(V), latents + groups, latents + groups))
    S[:, :latents, :latents] = root @ V[:, :own, :own] @ np.swapaxes(root, 1, 2)
    S[:, :latents, latents:] = root @ V[:, :own, own:]
    S[:, latents:, :latents] = np.swapaxes(S[:, :latents, latents:], 1, 2)
    S[:, latents:, latents:] = V[:, own:, own:]
    return S


def _group_sites(loads: Array, latent: Index, latents: int, sites: Sites) -> tuple[Array, Array]:
    """Precision (S, L + G, L + G) and shift (S, L + G) of the product of the group's sites."""
    picks = np.eye(latents)[latent]
    size = latents + loads.shape[2]
    T, t = np.zeros((len(loads), size, size)), np.zeros((len(loads), size))
    place = np.arange(latents)
    T[:, place, place] = sites.uu @ picks
    T[:, :latents, latents:] = picks.T @ (sites.us[..., None] * loads)
    T[:, latents:, :latents] = np.swapaxes(T[:, :latents, latents:], 1, 2)
    T[:, latents:, latents:] = np.swapaxes(loads, 1, 2) @ (sites.ss[..., None] * loads)
    t[:, :latents] = sites.u @ picks
    t[:, latents:] = (loads * sites.s[..., None]).sum(1)
    return T, t


def _site_constants(approx: Approximation, nodes: Index, cells: Index) -> Array:
    """Log normaliser (S, m) by which a site falls short of the likelihood of its cell.

    The likelihood averaged over the cavity, less the bare site averaged over it.
    """
    at = np.ix_(nodes, cells)
    cavity = Pair(**{k: v[at] for k, v in vars(approx.cavity).items()})
    sites = Sites(**{k: v[at] for k, v in vars(approx.sites).items()})
    outer = natural(cavity)
    uu, us, ss = outer.uu + sites.uu, outer.us + sites.us, outer.ss + sites.ss
    u, s = outer.u + sites.u, outer.s + sites.s
    det = uu * ss - us**2
    form = (ss * u**2 - 2.0 * us * u * s + uu * s**2) / det
    form_cavity = outer.u * cavity.u + outer.s * cavity.s
    det_cavity = outer.uu * outer.ss - outer.us**2
    log_bare = 0.5 * (np.log(det_cavity) - np.log(det) + form - form_cavity)
    return approx.tilted.log_z[at] - log_bare


def _summary(
    model: Model,
    readings: Index,
    lik: CellLikelihood,
    ahead: Ahead,
    weights: Array,
    trusted: bool,
    within: float,
) -> GroupOut:
    cells = model.cells
    span = 1.0 if lik.link == "logit" else 2.0 * model.family.priors.mean_sd
    carrying = np.flatnonzero(weights > 1e-4 * weights.max())
    w = weights[carrying] / weights[carrying].sum()
    some, law = lik.nodes(carrying), _nodes(ahead, carrying)
    pit = np.clip(w @ _transform(cells, some, law, readings), 0.0, 1.0)
    means = _cell_law(cells, some, law)
    told = (cells.censored[ahead.cells] == 0) & (w @ (means.spread < within * span) >= 0.5)
    pit = np.where(told[np.searchsorted(ahead.cells, cells.cell[readings])], pit, np.nan)
    if not told.any():
        return GroupOut(pit, 0.0, 0.0, 0.5, float(1.0 / (weights**2).sum()), trusted)
    shift, z, likeness = _together(means, np.flatnonzero(told))
    return GroupOut(
        pit,
        float(w @ likeness),
        float(w @ shift),
        float(w @ _normal_cdf(z)),
        float(1.0 / (weights**2).sum()),
        trusted,
    )


def _nodes(ahead: Ahead, index: Index) -> Ahead:
    return replace(
        ahead,
        mean=ahead.mean[index],
        covariance=ahead.covariance[index],
        loads=ahead.loads[index],
    )


def _pairs(ahead: Ahead) -> tuple[Array, Array, Array, Array, Array]:
    """Means u, s and covariances uu, us, ss (S, m) of the cells' pairs."""
    L = ahead.mean.shape[1] - ahead.loads.shape[2]
    C, loads, at = ahead.covariance, ahead.loads, ahead.latent
    u, uu = ahead.mean[:, at], np.diagonal(C, axis1=1, axis2=2)[:, at]
    s = (loads @ ahead.mean[:, L:, None])[..., 0]
    us = (C[:, at, L:] * loads).sum(-1)
    ss = ((loads @ C[:, L:, L:]) * loads).sum(-1)
    return u, s, np.maximum(uu, 1e-12), us, ss


def _transform(cells: Cells, lik: CellLikelihood, ahead: Ahead, readings: Index) -> Array:
    """Probability (S, n) at each node that a reading lies below what was read."""
    u, s, uu, us, ss = _pairs(ahead)
    place = np.searchsorted(ahead.cells, cells.cell[readings])
    near, y = _few(lik, ahead.cells), cells.y[readings]
    points = u[..., None] + np.sqrt(uu)[..., None] * _Z
    s_given = s[..., None] + (us / uu)[..., None] * (points - u[..., None])
    s_var = np.maximum(ss - us**2 / uu, 0.0)[..., None]
    g, h = near.process_mean(points), near.scale[..., None]
    noise = near.reading_variance(points) + np.zeros_like(points)
    if lik.link == "identity":
        # The sum over u is known: a normal law again.
        total = np.sqrt(uu + noise[..., 0])[:, place]
        return _normal_cdf((y - lik.offset - u[:, place]) / total)
    sd = np.sqrt(noise + (h * g) ** 2 * s_var)
    centre = (1.0 + h * s_given) * g
    below = _normal_cdf((y[:, None] - centre[:, place]) / sd[:, place]) @ _W
    return below + _step(_few(near, place), y, u[:, place], uu[:, place], ss[:, place])


def _step(lik: CellLikelihood, y: Array, u: Array, uu: Array, ss: Array) -> Array:
    """What the sum over the points misses (S, n) of the step that a small noise makes in u.

    The Gaussian step of the same place and slope has a known average over u.
    """
    at = latent_of(lik.link, y, lik.ceiling) - lik.offset
    at = np.where(np.isfinite(at), at, 50.0 * np.sign(y - 0.5 * lik.ceiling))
    noise = lik.reading_variance(at) + (lik.scale * y) ** 2 * ss
    width = np.sqrt(noise) / np.maximum(lik.slope(at), 1e-6)
    points = u[..., None] + np.sqrt(uu)[..., None] * _Z
    summed = _normal_cdf((at[..., None] - points) / width[..., None]) @ _W
    return _normal_cdf((at - u) / np.sqrt(uu + width**2)) - summed


def _normal_cdf(z: Array) -> Array:
    from scipy.special import ndtr

    return np.asarray(ndtr(z))


def _few(lik: CellLikelihood, cells: Index) -> CellLikelihood:
    return replace(
        lik,
        mean=lik.mean[cells],
        count=lik.count[cells],
        within=lik.within[cells],
        variance=lik.variance[cells],
        censored=lik.censored[cells],
        wander=lik.wander[cells],
    )


@dataclass(frozen=True)
class _Means:
    """Cell means y (m,) and their law at S nodes: centre (S, m) and covariance (S, m, m); levels
    (S, m) that a common shift multiplies, the process mean of a fraction, else 1; spread (S, m): sd
    of the process mean.
    """

    y: Array
    centre: Array
    covariance: Array
    levels: Array
    spread: Array


def _together(means: _Means, told: Index) -> tuple[Array, Array, Array]:
    """Shift (S,) of the cells told, by generalised least squares, it in its sd; their likeness."""
    levels, K = means.levels[:, told], means.covariance[:, told][:, :, told]
    both = np.stack([levels, means.y[told] - means.centre[:, told]], axis=2)
    solved = np.linalg.solve(K, both)
    strength = (levels * solved[..., 0]).sum(1)
    shift = (levels * solved[..., 1]).sum(1) / strength
    sd = np.sqrt(np.diagonal(K, axis1=1, axis2=2))
    m = len(told)
    total = (K / (sd[:, :, None] * sd[:, None, :])).sum((1, 2))
    likeness = (total - m) / (m * (m - 1.0)) if m > 1 else np.zeros(len(K))
    return shift, shift * np.sqrt(strength), likeness


def _cell_law(cells: Cells, lik: CellLikelihood, ahead: Ahead) -> _Means:
    """The law of the cell means.

    The process mean is linearised about its average slope, with the variance that it really has.
    """
    at = ahead.cells
    L = ahead.mean.shape[1] - ahead.loads.shape[2]
    u, s, uu, _, _ = _pairs(ahead)
    near = _few(lik, at)
    points = u[..., None] + np.sqrt(uu)[..., None] * _Z
    g = near.process_mean(points)
    level = g @ _W
    slope = (g * _Z) @ _W / np.sqrt(uu) if lik.link == "logit" else np.ones_like(u)
    spare = np.maximum(((g - level[..., None]) ** 2) @ _W - slope**2 * uu, 0.0)
    # One row a cell: its reading per unit of each latent value and scale error.
    J = np.zeros((*u.shape, ahead.mean.shape[1]))
    J[:, np.arange(len(at)), ahead.latent] = (1.0 + near.scale * s) * slope
    J[:, :, L:] = (near.scale * level)[..., None] * ahead.loads
    K = J @ ahead.covariance @ np.swapaxes(J, 1, 2)
    noise = near.reading_variance(u)
    index = np.arange(len(at))
    K[:, index, index] += noise / cells.count[at] + spare
    centre = (1.0 + near.scale * s) * level
    levels = level if lik.link == "logit" else np.ones_like(level)
    spread = np.sqrt(slope**2 * uu + spare)
    return _Means(cells.mean[at], centre, K, levels, spread)
