"""Predictions of a group of cells, such as a plate, from all others, without refitting.

Nodes are reweighted by 1 / p(y_group | rest, theta), as leave-one-out does for a single reading
(Gelfand, Dey & Chang 1992; Vehtari, Gelman & Gabry 2017, section 2).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.ahead import Ahead, predict_ahead
from muntin.surrogate.cells import Cells
from muntin.surrogate.evidence import Model
from muntin.surrogate.hyperparameters import Posterior, integrate
from muntin.surrogate.links import latent_of
from muntin.surrogate.pareto import tail_shape
from muntin.surrogate.tilted import CellLikelihood
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
    some, law = lik.nodes(carrying), ahead.nodes(carrying)
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


def _transform(cells: Cells, lik: CellLikelihood, ahead: Ahead, readings: Index) -> Array:
    """Probability (S, n) at each node that a reading lies below what was read."""
    pair = ahead.pairs()
    u, s, uu, us, ss = pair.u, pair.s, pair.uu, pair.us, pair.ss
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
    L, pair = ahead.latents, ahead.pairs()
    u, s, uu = pair.u, pair.s, pair.uu
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
