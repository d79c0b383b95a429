"""Leave-one-out predictions of every reading, without refitting.

At fixed hyperparameters the cavity of a cell is the posterior without it; the other readings of
the cell are put back by quadrature (Rasmussen & Williams 2006, section 5.4.2). Nodes are
reweighted by 1 / p(y_i | y_-i, theta) (Gelfand, Dey & Chang 1992).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.cells import Cells
from muntin.surrogate.links import latent_of, slope_of
from muntin.surrogate.propagation import Approximation
from muntin.surrogate.tilted import CellLikelihood, Pair, Points, place

Array = NDArray[np.float64]


@dataclass(frozen=True)
class LeaveOneOut:
    """For each reading (n,): log predictive density, predictive mean and sd, and the probability
    integral transform, all on the scale of the readings.
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

    prior_variance (S, C): of the latent value of each cell. A cavity wider than the prior is no
    posterior (a wild well nearby bends the sites); such a node says nothing of that reading, as
    long as others do.
    """
    c = cells.cell
    others = _others(cells, lik)
    cavity = Pair(**{k: v[:, c] for k, v in vars(approx.cavity).items()})
    single = cells.count[c] == 1.0
    tilted = approx.tilted.pair
    start_u = np.where(single, cavity.u, tilted.u[:, c])
    start_sd = np.sqrt(np.where(single, cavity.uu, tilted.uu[:, c]))
    points = place(others, cavity, start_u, start_sd)
    log_rest = np.where(single, 0.0, points.log_z + others.log_within())
    log_p = approx.tilted.log_z[:, c] - log_rest
    s, s_var = points.scale_given()
    loading = points.loading
    g = others.process_mean(points.u)
    centre = g + loading * s
    variance = (lik.noise + cells.variance[c])[..., None] + loading**2 * s_var
    mean = (points.w * centre).sum(-1)
    square = (points.w * ((centre - mean[..., None]) ** 2 + variance)).sum(-1)
    pit = (points.w * _normal_cdf((cells.y[:, None] - centre) / np.sqrt(variance))).sum(-1)
    if lik.link == "identity":
        pit = _normal_cdf((cells.y - mean) / np.sqrt(square))
    else:
        pit = np.where(single, _single_pit(cells, lik, cavity, points, pit), pit)
    log_w = log_weights[:, None] - log_p
    absurd = (approx.cavity.uu > 1.001 * prior_variance) | (approx.cavity.ss > 1.001)
    absurd = (absurd & ~absurd.all(axis=0))[:, c]
    log_w = np.where(absurd, -np.inf, log_w) + _lost(log_weights, absurd)
    log_density = -np.logaddexp.reduce(log_w)
    w = np.exp(log_w + log_density)
    total = (w * mean).sum(0)
    spread = (w * (square + (mean - total) ** 2)).sum(0)
    return LeaveOneOut(log_density, total, np.sqrt(spread), (w * pit).sum(0))


def _single_pit(
    cells: Cells, lik: CellLikelihood, cavity: Pair, points: Points, pit: Array
) -> Array:
    """The transform (S, n) of readings alone in their cell, the step taken out of the sum.

    A small noise makes a step of it in u, which the points straddle; the Gaussian step of the
    same place and slope has a known average over the cavity.
    """
    at = latent_of(lik.link, cells.y, lik.ceiling) - lik.offset
    slope = slope_of(lik.link, np.where(np.isfinite(at), at, 0.0) + lik.offset, lik.ceiling)
    noise = lik.noise + cells.variance[cells.cell]
    width = np.sqrt(noise + (lik.scale * cells.y) ** 2 * cavity.ss) / slope
    exact = _normal_cdf((at - cavity.u) / np.sqrt(cavity.uu + width**2))
    summed = (points.w * _normal_cdf((at[..., None] - points.u) / width[..., None])).sum(-1)
    return np.clip(pit + exact - summed, 0.0, 1.0)


def _lost(log_weights: Array, absurd: NDArray[np.bool_]) -> Array:
    """Log of the factor (n,) that makes up for the weight of the nodes left out."""
    kept = np.where(absurd, -np.inf, log_weights[:, None])
    return -np.logaddexp.reduce(kept)


def _others(cells: Cells, lik: CellLikelihood) -> CellLikelihood:
    """One pseudo-cell a reading: the other readings of its cell; a count of 1e-12 says none."""
    c = cells.cell
    n = cells.count[c]
    rest = np.maximum(n - 1.0, 1e-12)
    mean = np.where(n > 1.0, (n * cells.mean[c] - cells.y) / rest, 0.0)
    total = cells.within[c] - (cells.y - cells.mean[c]) ** 2 * n / rest
    within = np.where(n > 1.0, np.maximum(total, 0.0), 0.0)
    return replace(lik, mean=mean, count=rest, within=within, variance=cells.variance[c])


def _normal_cdf(z: Array) -> Array:
    from scipy.special import ndtr

    return np.asarray(ndtr(z))
