"""The exact posterior of a model by importance sampling, written out apart from the engine.

At every hyperparameter node the whitened latents are drawn from a heavy-tailed law about the
engine's Gaussian and weighted by prior times likelihood, which is written out here anew; this gives
the node's evidence and probabilities without the engine's approximation. Draws lie on Sobol'
points, and a weight counts for sqrt(n) times the mean weight at most (Ionides 2008, J. Comput.
Graph. Stat. 17:295), lest one draw in a far tail speak for a node.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import expit, gammaincinv, gammaln, log_ndtr, logit, ndtr, ndtri
from scipy.stats.qmc import Sobol

from muntin.surrogate.evidence import Model
from muntin.surrogate.hyperparameters import Posterior

Array = NDArray[np.float64]
DEGREES = 8.0


@dataclass(frozen=True)
class ExactNode:
    """One hyperparameter node: its log evidence; weights (draws,) of draws of the posterior; at n
    conditions the mean (draws, n) and the variance left (n,) of the latent value given a draw.
    """

    log_evidence: float
    weights: Array
    mean: Array
    left: Array

    def above(self, least: float) -> Array:
        """Probability (n,) that the latent value exceeds `least`."""
        return np.asarray(self.weights @ ndtr((self.mean - least) / np.sqrt(self.left)))


def heavy_tailed(
    mean: Array, V: Array, rng: np.random.Generator, count: int
) -> tuple[Array, Array]:
    """Draws (count, R) of a multivariate t about a Gaussian, and their log density."""
    size, root = len(mean), np.linalg.cholesky(V)
    points = np.clip(Sobol(size + 1, rng=rng).random(count), 1e-9, 1.0 - 1e-9)
    chi = 2.0 * gammaincinv(DEGREES / 2, points[:, :1]) / DEGREES
    z = ndtri(points[:, 1:]) / np.sqrt(chi)
    log_q = gammaln((DEGREES + size) / 2) - gammaln(DEGREES / 2)
    log_q -= size / 2 * np.log(DEGREES * np.pi) + np.log(np.diag(root)).sum()
    return mean + z @ root.T, log_q - (DEGREES + size) / 2 * np.log1p((z**2).sum(1) / DEGREES)


def maps(model: Model, theta: Array, X: Array) -> tuple[Array, Array, Array]:
    """Maps from the whitened latents to the cells' latent values (U, R) and to f at coded X
    (n, R), and the variance (n,) of f that the latents leave, at one node theta (1, H).
    """
    layout, cells, family = model.layout, model.cells, model.family
    own, inside = layout.family(theta), layout.inside_sd(theta)[0]
    groups = list(cells.inside.T)
    if family.name == "gp":
        K = family.covariance(own, cells.X, cells.X)[0] + 1e-10 * own[0, 0] ** 2 * np.eye(
            len(cells.X)
        )
        for sd, group in zip(inside, groups, strict=True):
            K += sd**2 * (group[:, None] == group)
        latents = np.linalg.cholesky(K)
        at_x = np.linalg.solve(latents, family.covariance(own, cells.X, X)[0]).T
        return latents, at_x, np.maximum(family.variance(own, X)[0] - (at_x**2).sum(1), 1e-12)
    sd = family.coefficient_sd(own)[0]
    blocks, width = [family.basis(cells.X) * sd], 0
    for tau, group in zip(inside, groups, strict=True):
        blocks.append(tau * np.eye(group.max() + 1)[group])
        width += group.max() + 1
    at_x = np.concatenate([family.basis(X) * sd, np.zeros((len(X), width))], axis=1)
    return np.concatenate(blocks, axis=1), at_x, np.full(len(X), 1e-12)


def ceiling_of(model: Model, theta: Array) -> float:
    """The ceiling at one node theta (1, H)."""
    if "ceiling_gap" not in model.layout.names:
        return 1.0
    return 1.0 - min(float(np.exp(theta[0, model.layout.names.index("ceiling_gap")])), 0.5)


def least_latent(model: Model, theta: Array, target: float) -> float:
    """Latent value, offset taken off, above which the process mean reaches `target`, which lies on
    the scale where noise is additive; infinite where the target lies above the ceiling.
    """
    if model.link == "logit":
        ceiling = ceiling_of(model, theta)
        return (
            float(logit(target / ceiling)) - model.family.priors.mean
            if (ceiling > target)
            else np.inf
        )
    return target - model.family.priors.mean


def log_likelihood(model: Model, theta: Array, f: Array, scale: Array) -> Array:
    """Log likelihood (draws,) of the readings at latent values f (draws, U) and standardised scale
    errors (draws, groups of all scale errors).
    """
    layout, cells = model.layout, model.cells
    error, start = np.zeros((len(f), len(cells))), 0
    for sd, group in zip(layout.scale_sd(theta)[0], cells.scale, strict=True):
        error += sd * scale[:, start : start + group.max() + 1][:, group]
        start += group.max() + 1
    u = f[:, cells.latent] + model.family.priors.mean
    g, slope = u, np.ones_like(u)
    if model.link == "logit":
        share = expit(u)
        g = ceiling_of(model, theta) * share
        slope = g * (1.0 - share)
    variance = layout.noise(theta)[0] ** 2 + cells.variance + slope**2 * model.wander
    sd = np.sqrt(variance)[:, cells.cell]
    z = (cells.y - ((1.0 + error) * g)[:, cells.cell]) / sd
    read = -0.5 * z**2 - np.log(sd) - 0.5 * np.log(2 * np.pi)
    censored = cells.censored[cells.cell]
    return np.asarray(np.where(censored == 0, read, log_ndtr(-censored * z)).sum(1))


def exact_node(
    model: Model,
    posterior: Posterior,
    node: int,
    X: Array,
    rng: np.random.Generator,
    count: int = 1024,
) -> ExactNode:
    """One node of the engine's posterior, exact but for `count` draws, at coded X (n, D)."""
    approx, theta = posterior.evidence.approximation, posterior.evidence.theta[[node]]
    w, log_q = heavy_tailed(approx.mean[node], approx.V[node], rng, count)
    latents, at_x, left = maps(model, theta, X)
    own = w[:, : latents.shape[1]]
    log_like = log_likelihood(model, theta, own @ latents.T, w[:, latents.shape[1] :])
    log_prior = -0.5 * (w**2).sum(1) - w.shape[1] / 2 * np.log(2 * np.pi)
    log_w = log_like + log_prior - log_q
    log_w = np.minimum(log_w, np.logaddexp.reduce(log_w) - 0.5 * np.log(count))
    total = float(np.logaddexp.reduce(log_w))
    return ExactNode(total - np.log(count), np.exp(log_w - total), own @ at_x.T, left)


def node_weights(posterior: Posterior, log_evidence: Array) -> Array:
    """Weights (S,) of the engine's nodes once their exact log evidence (S,) is known."""
    log_w = posterior.log_weights + log_evidence - posterior.evidence.log
    return np.asarray(np.exp(log_w - np.logaddexp.reduce(log_w)))
