"""Draws of the latent surface about the nodes, weighted by the exact likelihood.

Where few readings leave the law of f at a node a shape that mean, variance and skewness do not
tell, a cloud of draws tells it. At every node the whitened variables are drawn about the node's
Gaussian, on scrambled Sobol' points, and weighted by prior times likelihood over the density they
were drawn from (Geweke 1989, Econometrica 57:1317, eq. 4). A weight counts for sqrt(n) times the
mean weight of its node at most (Ionides 2008, J. Comput. Graph. Stat. 17:295). The mean weight of a
node is its evidence, by which the node counts. Given a draw the surface is Gaussian with the
variance that the latent values leave and a fiftieth of the node's own.
"""

from __future__ import annotations

import itertools

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.assembly import drawn_nodes_of
from muntin.surrogate.evidence import Evidence, Model
from muntin.surrogate.hyperparameters import Posterior
from muntin.surrogate.links import Link
from muntin.surrogate.nodes import Nodes, Surface
from muntin.surrogate.sites import Rows
from muntin.surrogate.skewness import skew_axis
from muntin.surrogate.tailed import Tailed

Array = NDArray[np.float64]
Index = NDArray[np.intp]
DRAWS = 32768
# More latent values make the weights uneven, and the Gaussian law of a node nearly exact.
_MOST_LATENTS = 40
_LEAST_DRAWS, _LEAST_SHARE, _LEAST_EFFECTIVE = 8, 0.5, 0.1
# Share of a node's covariance that spreads each of its draws.
_SMOOTH = 0.02
# Numbers that the maps of some draws may hold at a time.
_CHUNK = 4_000_000


def cloud_of(
    model: Model, posterior: Posterior, link: Link, draws: int, seed: int
) -> Surface | None:
    """About so many draws at the nodes of the posterior, shared out by the nodes' weights.

    None where the Gaussian law is exact, where the latent values are many, or where fewer than a
    tenth of the draws would be effective.
    """
    every = np.exp(posterior.log_weights)
    if not posterior.evidence.approximation.skewed or len(model.cells.X) > _MOST_LATENTS:
        return None
    keep = np.flatnonzero(every * draws >= _LEAST_SHARE)
    evidence, weights = posterior.evidence.nodes(keep), every[keep] / every[keep].sum()
    counts = np.maximum(_LEAST_DRAWS, np.round(draws * weights)).astype(np.intp)
    node = np.repeat(np.arange(len(keep)), counts)
    w, log_q = _around(model, evidence, node, np.random.default_rng((seed, draws)))
    log_w = _log_likelihood(model, evidence, node, w) - 0.5 * (w**2).sum(1) - log_q
    shares, log_mean = _weighed(log_w, counts)
    effective = weights @ (1.0 / np.add.reduceat(shares**2, _starts(counts)) / counts)
    if effective < _LEAST_EFFECTIVE:
        return None
    log_evidence = log_mean - evidence.log
    weights = weights * np.exp(log_evidence - log_evidence.max())
    weights /= weights.sum()
    return Surface((_smoothed(model, evidence, node, w),), weights[node] * shares, link)


def _smoothed(model: Model, evidence: Evidence, node: Index, w: Array) -> Nodes:
    """Draws drawn a little to their node's mean and spread by as much (West 1993, J. R. Stat. Soc.
    B 55:409, section 3, from memory), which keeps mean and covariance and leaves no steps.
    """
    own = evidence.root.shape[2]
    mean = evidence.approximation.mean[:, :own]
    drawn = mean[node] + np.sqrt(1.0 - _SMOOTH) * (w[:, :own] - mean[node])
    V = _SMOOTH * evidence.approximation.V[:, :own, :own]
    return drawn_nodes_of(model, evidence.theta, evidence.root, mean, V, node, drawn)


def _starts(counts: Index) -> Index:
    return np.cumsum(counts) - counts


def _around(
    model: Model, evidence: Evidence, node: Index, rng: np.random.Generator
) -> tuple[Array, Array]:
    """Draws (N, R) of the whitened variables, and their log density (N,) but for a constant."""
    from scipy.stats.qmc import Sobol

    approx = evidence.approximation
    root = np.asarray(np.linalg.cholesky(approx.V))
    law = Tailed(skew_axis(model.rows(evidence.theta, evidence.root), approx, root))
    sobol = Sobol(root.shape[1] + 2, rng=rng)
    z = law.draw(sobol.random_base2(int(np.ceil(np.log2(len(node)))))[: len(node)], node)
    w = np.empty_like(z)
    ends = np.searchsorted(node, np.arange(len(root) + 1))
    for k, (start, stop) in enumerate(itertools.pairwise(ends)):
        w[start:stop] = approx.mean[k] + z[start:stop] @ root[k].T
    log_det = np.log(np.diagonal(root, axis1=1, axis2=2)).sum(1)
    return w, law.log_density(z, node) - log_det[node]


def _log_likelihood(model: Model, evidence: Evidence, node: Index, w: Array) -> Array:
    """Exact log likelihood (N,) of the readings at draws (N, R) of the whitened variables."""
    rows = model.rows(evidence.theta, evidence.root)
    likelihood = model.likelihood(evidence.theta)
    out = np.empty(len(node))
    width = rows.root.shape[1] * w.shape[1] + len(rows.latent) * w.shape[1]
    size = max(1, _CHUNK // width)
    for start in range(0, len(node), size):
        some = slice(start, start + size)
        u, s = _pairs(rows.nodes(node[some]), w[some])
        out[some] = likelihood.nodes(node[some]).log_density(u, s).sum(1)
    return out


def _pairs(rows: Rows, w: Array) -> tuple[Array, Array]:
    """Centred latent value and standardised scale error (N, C) of the cells at draws (N, R)."""
    own = rows.root.shape[2]
    u = (rows.root @ w[:, :own, None])[..., 0][:, rows.latent]
    return u, (rows.scale @ w[:, own:, None])[..., 0]


def _weighed(log_w: Array, counts: Index) -> tuple[Array, Array]:
    """Weights (N,) that sum to 1 at every node, none of them far above the mean, and the log mean
    (S,) of the weights of each node.
    """
    starts = _starts(counts)
    highest = np.maximum.reduceat(log_w, starts)
    w = np.exp(log_w - np.repeat(highest, counts))
    total = np.repeat(np.add.reduceat(w, starts), counts)
    w = np.minimum(w, total / np.sqrt(np.repeat(counts, counts)))
    held = np.add.reduceat(w, starts)
    return w / np.repeat(held, counts), highest + np.log(held / counts)
