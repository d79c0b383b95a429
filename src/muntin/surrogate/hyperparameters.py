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
from muntin.surrogate.layout import Layout
from muntin.surrogate.pareto import tail_shape

Array = NDArray[np.float64]
_DEGREES = 6.0
_BOUND = 4.0
_ROUNDS = 5
_STEP = 0.05
# So roughly settled are nodes that say no more than how wide the proposal should be.
_ROUGH = 0.1
# How far from the mode the fall along an axis is looked at, in sds there, and along the gap of a
# ceiling, in sds of its prior.
_AFAR = np.array([-4.0, -2.5, -1.2, 1.2, 2.5, 4.0])
_AFAR_GAP = np.array([-3.5, -2.5, -1.5, -0.7, 0.4, 0.8])
# The proposal is wider than the curvature says, since what it misses no weight can mend.
_WIDEN = 1.15
# Up to so many latent values: nodes of a round, effective nodes that are enough, and plenty; the
# first for each hyperparameter beyond two.
_EFFORT = ((40, 128, 35.0, 50.0), (200, 64, 26.0, 64.0))
_LEAST_EFFORT = (32, 13.0, 32.0)
_EXACT_EFFORT = (512, 256.0, 384.0)


@dataclass(frozen=True)
class Proposal:
    """Multivariate split t with _DEGREES degrees of freedom, eta space.

    centre (H,); root (H, H), whose columns are its axes, of the covariance of the coordinates in
    `order`; left and right (H,): scales of each axis to either side of the centre, in sds that root
    gives it (the two-piece law of Geweke 1989, section 4).
    """

    centre: Array
    order: NDArray[np.intp]
    root: Array
    left: Array
    right: Array

    @property
    def covariance(self) -> Array:
        """Covariance (H, H) without the split."""
        back = np.argsort(self.order)
        return (self.root @ self.root.T)[np.ix_(back, back)]

    def draw(self, points: Array) -> Array:
        """Points (n, H + 1) of the unit cube to draws eta (n, H)."""
        from scipy.special import chdtri, ndtri

        inside = np.clip(points, 1e-9, 1.0 - 1e-9)
        chi2, u, share = chdtri(_DEGREES, inside[:, -1:]), inside[:, :-1], self._share
        below, above = u / (2.0 * share), 0.5 + (u - share) / (2.0 * (1.0 - share))
        z = np.where(u < share, self.left * ndtri(np.minimum(below, 0.5)), 0.0)
        z += np.where(u < share, 0.0, self.right * ndtri(np.maximum(above, 0.5)))
        z *= np.sqrt(_DEGREES / chi2)
        eta = np.empty_like(z)
        eta[:, self.order] = z @ self.root.T
        return self.centre + eta

    def log_density(self, eta: Array) -> Array:
        """Log density (n,) at eta (n, H)."""
        from scipy.special import gammaln

        h = len(self.centre)
        z = self.along(eta)
        z /= np.where(z < 0.0, self.left, self.right)
        norm = (
            gammaln((_DEGREES + h) / 2) - gammaln(_DEGREES / 2) - h / 2 * np.log(_DEGREES * np.pi)
        )
        log_det = np.log(np.diagonal(self.root)).sum()
        log_det += np.log((self.left + self.right) / 2.0).sum()
        return norm - log_det - (_DEGREES + h) / 2 * np.log1p((z * z).sum(1) / _DEGREES)

    def along(self, eta: Array) -> Array:
        """Coordinates (n, H) of eta (n, H) along the axes."""
        return np.asarray(np.linalg.solve(self.root, (eta - self.centre)[:, self.order].T).T)

    @property
    def _share(self) -> Array:
        """Mass (H,) to the left of the centre."""
        return self.left / (self.left + self.right)


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
    """The proposal whose root follows from the curvature of the log posterior at its mode, and
    whose splits from how the log posterior falls off along the axes.
    """
    layout, h = model.layout, len(eta)
    order = _order(layout)
    around = np.concatenate([eta + _STEP * np.eye(h), eta - _STEP * np.eye(h)])
    evidence = evaluate(model, layout.theta(around), top)
    gradients = slope(model, evidence) * layout.log_sd - around
    hessian = -(gradients[:h] - gradients[h:]) / (2.0 * _STEP)
    values, vectors = np.linalg.eigh((hessian + hessian.T) / 2.0)
    # No direction is wider than the prior, nor so narrow that rounding decides.
    sd = 1.0 / np.sqrt(np.clip(values, 0.7, 1e8))
    root = np.linalg.cholesky((vectors * sd**2 @ vectors.T)[np.ix_(order, order)])
    left, right = np.ones(h), np.ones(h)
    looked = _looked_along(model)
    if len(looked):
        axes = np.zeros((len(looked), h))
        axes[:, order] = root.T[looked]
        left[looked], right[looked] = _splits(model, eta, top, axes)
    return Proposal(eta, order, _WIDEN * root, left, right)


def _looked_along(model: Model) -> NDArray[np.intp]:
    """Axes along which the fall of the log posterior is looked at: all, or the gap's, the last,
    where a node is dear.
    """
    h = len(model.layout)
    if len(model.cells.X) <= _EFFORT[0][0]:
        return np.arange(h)
    return np.arange(h - model.layout.ceiling, h)


def _splits(model: Model, eta: Array, top: Evidence, axes: Array) -> tuple[Array, Array]:
    """Scales (K,) to the left and to the right along axes (K, H), in their lengths; the gap of a
    ceiling is the last.
    """
    layout = model.layout
    length = np.linalg.norm(axes, axis=1)
    steps = np.tile(_AFAR, (len(axes), 1))
    if layout.ceiling:
        steps[-1] = _AFAR_GAP / length[-1]
    steps /= np.maximum(1.0, np.abs(steps) * length[:, None] / _BOUND)
    afar = (eta + steps[:, :, None] * axes[:, None, :]).reshape(-1, len(eta))
    height = top.log[0] + log_prior(eta[None])[0]
    there = evaluate(model, layout.theta(afar), top, _ROUGH).log + log_prior(afar)
    fall = np.maximum(height - there, 1e-3).reshape(steps.shape)
    # The sd of a Gaussian that falls off as far at that distance.
    wide = np.maximum(np.abs(steps) / np.sqrt(2.0 * fall), 1.0)
    left = np.where(steps < 0.0, wide, 0.0).max(axis=1)
    return left, np.where(steps > 0.0, wide, 0.0).max(axis=1)


def _order(layout: Layout) -> NDArray[np.intp]:
    """The coordinates with the gap of the ceiling, where there is one, last: far below what the
    readings tell apart its posterior is the prior's, which makes a long tail.
    """
    h, gap = len(layout), 1 + layout.inside + layout.scale
    every = np.arange(h)
    return np.append(np.delete(every, gap), gap) if layout.ceiling else every


def _refitted(eta: Array, weights: Array, last: Proposal) -> Proposal:
    """A proposal with the weighted mean, covariance and split, held to the last one's by its
    weight.
    """
    centre, order = weights @ eta, last.order
    away = eta - centre
    ess = 1.0 / (weights**2).sum()
    trust = ess / (ess + 2.0 * eta.shape[1])
    covariance = trust * (away.T * weights) @ away + (1.0 - trust) * last.covariance
    root = np.linalg.cholesky(covariance[np.ix_(order, order)])
    z = np.linalg.solve(root, away[:, order].T).T
    few = 2.0 / ess
    left, right = (
        np.sqrt(
            ((side * weights[:, None] * z**2).sum(0) + few)
            / ((side * weights[:, None]).sum(0) + few)
        )
        for side in (z < 0.0, z >= 0.0)
    )
    return Proposal(centre, order, root, np.maximum(left, 0.5), np.maximum(right, 0.5))


def effort(model: Model) -> tuple[int, float, float]:
    """Nodes of a round, effective nodes that are enough, and that are plenty whatever the tail of
    the weights: more where few latent values make a node cheap and leave the hyperparameters open,
    and where the node is exact, which makes it cheaper still.
    """
    latents = len(model.cells.X)
    if latents <= _EFFORT[0][0]:
        if model.link == "identity":
            return _EXACT_EFFORT
        _, nodes, enough, plenty = _EFFORT[0]
        open_to = max(len(model.layout) - 2, 1)
        return nodes, open_to * enough, open_to * plenty
    for most, nodes, enough, plenty in _EFFORT[1:]:
        if latents <= most:
            return nodes, enough, plenty
    return _LEAST_EFFORT


def integrate(
    model: Model,
    seed: int,
    nodes: int | None = None,
    start: Array | None = None,
    enough: float | None = None,
) -> Posterior:
    """The posterior of the hyperparameters as weighted nodes; their mode is searched from `start`.

    nodes: drawn in each round, a power of two, by default as many as `effort` says. enough:
    effective nodes after which no more are drawn, by default 0.4 of a round's nodes where those
    are given.
    """
    from scipy.stats.qmc import Sobol

    layout = model.layout
    if nodes is None:
        nodes, enough, plenty = effort(model)
    else:
        enough, plenty = enough or 0.4 * nodes, float(nodes)
    eta0, top = mode(model, start)
    proposals = [_at_mode(model, eta0, top)]
    every, evidence, again = np.zeros((0, len(layout))), top, False
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
        if not again and ess < len(layout):
            # So few nodes carry the weight where a second, heavier mode lies beside the first.
            again = True
            proposals.append(_at_mode(model, *mode(model, every[np.argmax(log_w)])))
        else:
            proposals.append(_refitted(every, weights, proposals[-1]))
    marginal = log_sum - float(np.log(len(log_w)))
    return Posterior(evidence, every, log_w - log_sum, marginal, ess, k_hat)
