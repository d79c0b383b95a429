"""What the readings say of each shared error: that of every plate, bottle or day by itself."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.evidence import Model
from muntin.surrogate.hyperparameters import Posterior

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Nodes of less than e^-9 of the largest weight move no interval.
_SPAN = 9.0
_HALVINGS = 50
_JITTER = 1e-9


@dataclass(frozen=True)
class GroupErrors:
    """Law of the errors of G groups at S nodes: weights (S,), mean and variance (S, G); a scale
    error as a share of the reading, an inside error in latent units.
    """

    weights: Array
    mean: Array
    variance: Array

    def quantiles(self, level: float) -> Array:
        """Quantile (G,) of each group's error, by bisection on the mixture."""
        from scipy.special import ndtr

        sd = np.sqrt(self.variance)
        low, high = (self.mean - 8.0 * sd).min(0), (self.mean + 8.0 * sd).max(0)
        for _ in range(_HALVINGS):
            middle = 0.5 * (low + high)
            under = self.weights @ ndtr((middle - self.mean) / sd) < level
            low, high = np.where(under, middle, low), np.where(under, high, middle)
        return 0.5 * (low + high)


def joined(parts: Sequence[GroupErrors], shares: Array) -> GroupErrors:
    """The law of several fits together, each weighted by its share."""
    return GroupErrors(
        np.concatenate([share * p.weights for p, share in zip(parts, shares, strict=True)]),
        np.concatenate([p.mean for p in parts]),
        np.concatenate([p.variance for p in parts]),
    )


def scale_errors(model: Model, posterior: Posterior, number: int) -> GroupErrors:
    """The errors of the scale error `number`, whose whitened values the approximation knows."""
    nodes, weights = _carrying(posterior)
    evidence = posterior.evidence
    groups = model.cells.scale_groups
    start = evidence.root.shape[2] + sum(groups[:number])
    own = slice(start, start + groups[number])
    sd = model.layout.scale_sd(evidence.theta)[nodes, number][:, None]
    approx = evidence.approximation
    variance = np.diagonal(approx.V, axis1=1, axis2=2)[nodes, own]
    return GroupErrors(weights, sd * approx.mean[nodes, own], sd**2 * variance)


def inside_errors(model: Model, posterior: Posterior, number: int) -> GroupErrors:
    """The errors of the inside error `number`, which are part of the latent values.

    With prior covariance K = L L' of the latent values f = L w and c that of f with the error e,
    E(e | w) = c' K^-1 L w, var(e | w) = sd^2 - c' K^-1 c (Rasmussen & Williams 2006, eq. A.6).
    """
    nodes, weights = _carrying(posterior)
    evidence, approx = posterior.evidence, posterior.evidence.approximation
    sd = model.layout.inside_sd(evidence.theta)[nodes, number]
    group = model.cells.inside[:, number]
    member = np.eye(int(group.max()) + 1)[group]
    L = evidence.root[nodes]
    K = L @ np.swapaxes(L, 1, 2)
    K = K + _JITTER * np.trace(K, axis1=1, axis2=2)[:, None, None] / K.shape[1] * np.eye(K.shape[1])
    c = sd[:, None, None] ** 2 * member
    solved = np.linalg.solve(K, c)
    A = np.swapaxes(solved, 1, 2) @ L
    own = L.shape[2]
    mean = (A @ approx.mean[nodes, :own, None])[..., 0]
    spread = np.einsum("sgr,srq,sgq->sg", A, approx.V[nodes][:, :own, :own], A)
    left = sd[:, None] ** 2 - (c * solved).sum(axis=1)
    return GroupErrors(weights, mean, np.maximum(left, 0.0) + spread)


def _carrying(posterior: Posterior) -> tuple[Index, Array]:
    log_w = posterior.log_weights
    nodes = np.flatnonzero(log_w > log_w.max() - _SPAN)
    weights = np.exp(log_w[nodes])
    return nodes, weights / weights.sum()
