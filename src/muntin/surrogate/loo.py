"""Leave-one-out predictions of every reading, without refitting.

At fixed hyperparameters the cavity of a cell is the posterior without it; the other readings of
the cell are put back by quadrature (Rasmussen & Williams 2006, section 5.4.2). Nodes are
reweighted by 1 / p(y_i | y_-i, theta) (Gelfand, Dey & Chang 1992).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.approximation import Approximation
from muntin.surrogate.cells import Cells
from muntin.surrogate.links import latent_of
from muntin.surrogate.tilted import CellLikelihood, Pair, Points, Tilted, place, pull_of

Array = NDArray[np.float64]


@dataclass(frozen=True)
class LeaveOneOut:
    """For each reading (n,), or at each node (S, n): log predictive density, predictive mean and
    sd, and the probability integral transform, all on the scale of the readings. Of a censored
    reading the density is its probability, and the transform NaN.
    """

    log_density: Array
    mean: Array
    sd: Array
    pit: Array


def leave_one_out(
    cells: Cells,
    lik: CellLikelihood,
    approx: Approximation,
    log_weights: Array,
    prior_variance: Array,
) -> LeaveOneOut:
    """Predictions of every reading from the others, averaged over S nodes of log weights (S,).

    prior_variance (S, C): of the latent value of each cell.
    """
    law = node_laws(cells, lik, approx.cavity, approx.tilted)
    return averaged(law, left_out(cells, law, approx, log_weights, prior_variance))


def node_laws(cells: Cells, lik: CellLikelihood, cavity: Pair, tilted: Tilted) -> LeaveOneOut:
    """Predictions (S, n) of every reading at each node, from the cavity and the tilted answer of
    its cell.
    """
    if lik.link == "identity" and not cells.censored.any():
        return _normal_law(cells, lik, cavity)
    return _numeric_law(cells, lik, cavity, tilted)


def left_out(
    cells: Cells,
    law: LeaveOneOut,
    approx: Approximation,
    log_weights: Array,
    prior_variance: Array,
) -> Array:
    """Normalised log weights (S, n) of the nodes for each reading, given the others.

    A cavity wider than the prior is no posterior (a wild well nearby bends the sites); such a node
    says nothing of that reading, as long as others do.
    """
    absurd = (approx.cavity.uu > 1.001 * prior_variance) | (approx.cavity.ss > 1.001)
    absurd = (absurd & ~absurd.all(axis=0))[:, cells.cell]
    log_w = np.where(absurd, -np.inf, log_weights[:, None] - law.log_density)
    return log_w - np.logaddexp.reduce(log_w)


def averaged(law: LeaveOneOut, log_weights: Array) -> LeaveOneOut:
    """Predictions (n,) of the nodes together; normalised log weights (S, n)."""
    w = np.exp(log_weights)
    log_density = np.logaddexp.reduce(log_weights + law.log_density)
    mean = (w * law.mean).sum(0)
    variance = (w * (law.sd**2 + (law.mean - mean) ** 2)).sum(0)
    return LeaveOneOut(log_density, mean, np.sqrt(variance), (w * law.pit).sum(0))


def _normal_law(cells: Cells, lik: CellLikelihood, cavity: Pair) -> LeaveOneOut:
    """Predictions (S, n) at each node of the identity link, in closed form."""
    c = cells.cell
    u, uu = cavity.u[:, c], cavity.uu[:, c]
    v, others = (lik.base_variance + lik.wander)[:, c], _others(cells, lik)
    precision = 1.0 / uu + others.count / v
    mean = (u / uu + others.count * (others.mean - lik.offset) / v) / precision + lik.offset
    variance = 1.0 / precision + v
    z = (cells.y - mean) / np.sqrt(variance)
    log_density = -0.5 * (z**2 + np.log(2.0 * np.pi * variance))
    return LeaveOneOut(log_density, mean, np.sqrt(variance), _normal_cdf(z))


def _numeric_law(cells: Cells, lik: CellLikelihood, cavity: Pair, tilted: Tilted) -> LeaveOneOut:
    """Predictions (S, n) at each node by quadrature over the cavity."""
    c = cells.cell
    others = _others(cells, lik)
    cavity = Pair(**{k: v[:, c] for k, v in vars(cavity).items()})
    single = cells.count[c] == 1.0
    start_u = np.where(single, cavity.u, tilted.pair.u[:, c])
    start_sd = np.sqrt(np.where(single, cavity.uu, tilted.pair.uu[:, c]))
    points = place(others, cavity, start_u, start_sd)
    log_rest = np.where(single, 0.0, points.log_z)
    log_density = tilted.log_z[:, c] - log_rest
    pull = pull_of(points.residual, points.total, points.censored)
    s, s_var = points.scale_given(pull)
    centre = others.process_mean(points.u) + points.loading * s
    variance = points.reading_variance + points.loading**2 * s_var
    mean = (points.w * centre).sum(-1)
    square = (points.w * ((centre - mean[..., None]) ** 2 + variance)).sum(-1)
    pit = (points.w * _normal_cdf((cells.y[:, None] - centre) / np.sqrt(variance))).sum(-1)
    pit = np.where(single, _single_pit(others, cells.y, cavity, points, pit), pit)
    pit = np.where(cells.censored[c] == 0, pit, np.nan)
    return LeaveOneOut(log_density, mean, np.sqrt(square), pit)


def _single_pit(lik: CellLikelihood, y: Array, cavity: Pair, points: Points, pit: Array) -> Array:
    """The transform (S, n) of readings y (n,) alone in their cell, the step taken out of the sum.

    A small noise makes a step of it in u, which the points straddle; the Gaussian step of the
    same place and slope has a known average over the cavity.
    """
    at = np.broadcast_to(latent_of(lik.link, y, lik.ceiling) - lik.offset, cavity.u.shape)
    at_finite = np.where(np.isfinite(at), at, -lik.offset)
    noise = lik.reading_variance(at_finite)
    width = np.sqrt(noise + (lik.scale * y) ** 2 * cavity.ss) / lik.slope(at_finite)
    exact = _normal_cdf((at - cavity.u) / np.sqrt(cavity.uu + width**2))
    summed = (points.w * _normal_cdf((at[..., None] - points.u) / width[..., None])).sum(-1)
    return np.clip(pit + exact - summed, 0.0, 1.0)


def _others(cells: Cells, lik: CellLikelihood) -> CellLikelihood:
    """One pseudo-cell a reading: the other readings of its cell; a count of 1e-12 says none."""
    c = cells.cell
    n = cells.count[c]
    rest = np.maximum(n - 1.0, 1e-12)
    mean = np.where(n > 1.0, (n * cells.mean[c] - cells.y) / rest, 0.0)
    total = cells.within[c] - (cells.y - cells.mean[c]) ** 2 * n / rest
    within = np.where(n > 1.0, np.maximum(total, 0.0), 0.0)
    return replace(
        lik,
        mean=mean,
        count=rest,
        within=within,
        variance=cells.variance[c],
        censored=np.zeros_like(c),
        wander=lik.wander[c],
    )


def _normal_cdf(z: Array) -> Array:
    from scipy.special import ndtr

    return np.asarray(ndtr(z))
