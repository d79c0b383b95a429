"""Integration over hyperparameters by importance sampling at their mode.

The proposal is a multivariate t at the mode with the curvature found there, on scrambled Sobol'
points; where its weights are poor it is refitted to them and more nodes are drawn, all rounds
weighted by their mixture (adaptive multiple importance sampling, Cornuet et al. 2012).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.evidence import Evidence, Model, evaluate, joined, slope
from muntin.surrogate.pareto import tail_shape

Array = NDArray[np.float64]
_DEGREES = 6.0
_BOUND = 4.0
_ROUNDS = 5
_STEP = 0.05
# Up to so many latent values: nodes of a round, effective nodes that are enough, and plenty.
_EFFORT = ((40, 128, 90.0, 110.0), (200, 64, 26.0, 64.0))
_LEAST_EFFORT = (32, 13.0, 32.0)


@dataclass(frozen=True)
class Proposal:
    """Multivariate t with _DEGREES degrees of freedom: centre (H,) and root A (H, H), eta space."""

    centre: Array
    root: Array

    def draw(self, points: Array) -> Array:
        """Points (n, H + 1) of the unit cube to draws eta (n, H)."""
        from scipy.special import chdtri, ndtri

        inside = np.clip(points, 1e-9, 1.0 - 1e-9)
        chi2 = chdtri(_DEGREES, inside[:, -1:])
        return self.centre + ndtri(inside[:, :-1]) * np.sqrt(_DEGREES / chi2) @ self.root.T

    def log_density(self, eta: Array) -> Array:
        """Log density (n,) at eta (n, H)."""
        from scipy.special import gammaln

        h = len(self.centre)
        z = np.linalg.solve(self.root, (eta - self.centre).T)
        norm = (
            gammaln((_DEGREES + h) / 2) - gammaln(_DEGREES / 2) - h / 2 * np.log(_DEGREES * np.pi)
        )
        log_det = np.log(np.abs(np.diagonal(self.root))).sum()
        return norm - log_det - (_DEGREES + h) / 2 * np.log1p((z * z).sum(0) / _DEGREES)


@dataclass(frozen=True)
class Posterior:
    """The evidence of S hyperparameter nodes, their standardised coordinates eta (S, H) and
    normalised log weights (S,); log marginal likelihood; effective sample size and Pareto k-hat of
    the weights.
    """

    evidence: Evidence
    eta: Array
    log_weights: Array
    log_marginal: float
    ess: float
    k_hat: float


def log_prior(eta: Array) -> Array:
    """Log prior (S,) of standardised hyperparameters eta (S, H)."""
    return -0.5 * (eta**2).sum(1) - 0.5 * eta.shape[1] * np.log(2.0 * np.pi)


def mode(model: Model, start: Array | None = None) -> tuple[Array, Evidence]:
    """Posterior mode eta (H,) searched from `start`, and the evidence there."""
    from scipy.optimize import minimize

    layout = model.layout
    best: list[tuple[float, Evidence]] = []

    def objective(eta: Array) -> tuple[float, Array]:
        near = best[0][1] if best else None
        evidence = evaluate(model, layout.theta(eta[None]), near)
        value = float(evidence.log[0] - 0.5 * eta @ eta)
        if not best or value > best[0][0]:
            best[:] = [(value, evidence)]
        return -value, eta - slope(model, evidence)[0] * layout.log_sd

    h = len(layout)
    found = minimize(
        objective,
        np.zeros(h) if start is None else start,
        jac=True,
        method="L-BFGS-B",
        bounds=[(-_BOUND, _BOUND)] * h,
        options={"maxiter": 60, "ftol": 1e-5, "gtol": 1e-2},
    )
    return found.x, evaluate(model, layout.theta(found.x[None]), best[0][1])


def _at_mode(model: Model, eta: Array, top: Evidence) -> Proposal:
    """The proposal whose root follows from the curvature of the log posterior at its mode."""
    layout, h = model.layout, len(eta)
    around = np.concatenate([eta + _STEP * np.eye(h), eta - _STEP * np.eye(h)])
    evidence = evaluate(model, layout.theta(around), top)
    gradients = slope(model, evidence) * layout.log_sd - around
    hessian = -(gradients[:h] - gradients[h:]) / (2.0 * _STEP)
    values, vectors = np.linalg.eigh((hessian + hessian.T) / 2.0)
    # No direction is wider than the prior, nor so narrow that rounding decides.
    sd = 1.0 / np.sqrt(np.clip(values, 0.7, 1e8))
    return Proposal(eta, np.linalg.cholesky(vectors * sd**2 @ vectors.T))


def _refitted(eta: Array, weights: Array, last: Proposal) -> Proposal:
    """A proposal with the weighted mean and covariance, held to the last one's by its weight."""
    centre = weights @ eta
    away = eta - centre
    ess = 1.0 / (weights**2).sum()
    trust = ess / (ess + 2.0 * eta.shape[1])
    covariance = trust * (away.T * weights) @ away + (1.0 - trust) * last.root @ last.root.T
    return Proposal(centre, np.linalg.cholesky(covariance))


def effort(latents: int) -> tuple[int, float, float]:
    """Nodes of a round, effective nodes that are enough, and that are plenty whatever the tail of
    the weights: more where few latent values make a node cheap and leave the hyperparameters open.
    """
    for most, nodes, enough, plenty in _EFFORT:
        if latents <= most:
            return nodes, enough, plenty
    return _LEAST_EFFORT


def integrate(
    model: Model, seed: int, nodes: int | None = None, start: Array | None = None
) -> Posterior:
    """The posterior of the hyperparameters as weighted nodes; their mode is searched from `start`.

    nodes: drawn in each round, a power of two; 0.4 of them effective are enough. By default as
    many as `effort` says.
    """
    from scipy.stats.qmc import Sobol

    layout = model.layout
    nodes, enough, plenty = (
        effort(len(model.cells.X)) if nodes is None else (nodes, 0.4 * nodes, float(nodes))
    )
    eta0, top = mode(model, start)
    proposals = [_at_mode(model, eta0, top)]
    every, evidence = np.zeros((0, len(layout))), top
    for number in range(_ROUNDS):
        sobol = Sobol(len(layout) + 1, rng=np.random.default_rng((seed, number)))
        points = sobol.random(nodes)
        eta = np.clip(proposals[-1].draw(points), -2 * _BOUND, 2 * _BOUND)
        found = evaluate(model, layout.theta(eta), evidence)
        evidence = joined([evidence, found]) if number else found
        every = np.concatenate([every, eta])
        log_q = np.logaddexp.reduce([p.log_density(every) for p in proposals]) - np.log(number + 1)
        log_w = evidence.log + log_prior(every) - log_q
        log_sum = float(np.logaddexp.reduce(log_w))
        weights = np.exp(log_w - log_sum)
        ess, k_hat = float(1.0 / (weights**2).sum()), tail_shape(log_w)
        # The shape of so short a tail is itself uncertain; many effective nodes outweigh it.
        if ess >= plenty or (ess >= enough and k_hat < 0.7):
            break
        proposals.append(_refitted(every, weights, proposals[-1]))
    marginal = log_sum - float(np.log(len(log_w)))
    return Posterior(evidence, every, log_w - log_sum, marginal, ess, k_hat)
