"""Joint posterior draws of a latent surface: functions, each of which can be asked anywhere.

A draw of the quadratic is a draw of its coefficients. A Gaussian process is drawn at anchors a;
elsewhere a draw is the mean of f given its values there. With k the prior's covariance, X the
conditions read, mean k(x, X) alpha and covariance k - k Q k of the node, and L L' that covariance
at the anchors, f(x) = k(x, X) (alpha - Q k(X, a) v) + k(x, a) v, v = L'^-1 z.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.drawn import DrawnPolynomial, DrawnProcess
from muntin.surrogate.influence import covariance_root
from muntin.surrogate.links import Link
from muntin.surrogate.nodes import Errors, Nodes, PolynomialNodes, ProcessNodes, Surface

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Nodes that speak where there is no cloud; each has its share of the draws.
_MOST_NODES = 128


@dataclass(frozen=True, eq=False)
class _Law:
    """Some of the draws, those about one node: f(x) = b(x) coefficients + the prior's mean.

    centres (K, D): coded conditions whose prior covariance with x is b(x); None where b(x) are the
    terms of the polynomial. coefficients (K, m), a column a draw.
    """

    node: ProcessNodes | PolynomialNodes
    centres: Array | None
    coefficients: Array

    def at(self, X: Array) -> Array:
        """The m draws of f (m, n) at coded X (n, D)."""
        node = self.node
        if isinstance(node, PolynomialNodes):
            b = node.family.basis(X)
        else:
            assert self.centres is not None
            b = node.family.covariance(node.own, X, self.centres)[0]
        return (b @ self.coefficients).T + node.family.priors.mean


@dataclass(frozen=True, eq=False)
class JointDraws:
    """N equally likely draws of the latent surface of one response.

    order (N,): where each draw stands among those of the laws, so that the draws of two responses
    pair at random.
    """

    link: Link
    laws: tuple[_Law, ...]
    order: Index

    def at(self, X: Array) -> Array:
        """The latent f (N, n) at coded X (n, D)."""
        return np.concatenate([law.at(X) for law in self.laws])[self.order]

    def wander(self, X: Array, setting: Array) -> Array:
        """Latent variance (N, n) of a well at coded X (n, D) set with sds `setting` (n, D)."""
        every = [((law.node.slopes(X) * setting) ** 2).sum(-1) for law in self.laws]
        return np.concatenate(every)[self._owner]

    @property
    def errors(self) -> Errors:
        """Sds of the errors of a well, draw by draw (N, ...)."""
        every = [law.node.errors for law in self.laws]
        return Errors(
            np.concatenate([e.noise for e in every])[self._owner],
            np.concatenate([e.inside for e in every])[self._owner],
            np.concatenate([e.scale for e in every])[self._owner],
            np.concatenate([e.ceiling for e in every])[self._owner],
        )

    @property
    def _owner(self) -> Index:
        """The law (N,) that each draw is of."""
        counts = [law.coefficients.shape[1] for law in self.laws]
        return np.repeat(np.arange(len(counts)), counts)[self.order]


def draw_jointly(
    surface: Surface, anchors: Array, draws: int, rng: np.random.Generator
) -> JointDraws:
    """Draws of f, hyperparameters among what is drawn, at coded anchors (A, D).

    From the cloud of a surface where it has one, else from up to 128 of its nodes; which, by
    systematic resampling of their weights.
    """
    laws = [
        _polynomial(node, centre, rng)
        if isinstance(node, PolynomialNodes)
        else _process(node, centre, anchors, rng)
        for node, centre in _centres(surface, draws)
    ]
    return JointDraws(surface.link, tuple(laws), rng.permutation(draws))


def _polynomial(node: PolynomialNodes, centre: Array, rng: np.random.Generator) -> _Law:
    """Draws about mean coefficients (m, p)."""
    root = covariance_root(node.V[0])
    return _Law(node, None, (centre + rng.standard_normal(centre.shape) @ root.T).T)


def _process(node: ProcessNodes, centre: Array, anchors: Array, rng: np.random.Generator) -> _Law:
    """Draws about means k(x, X) alpha, alpha (m, U)."""
    from scipy.linalg import solve_triangular

    root = covariance_root(node.covariance(anchors, anchors)[0])
    z = rng.standard_normal((len(anchors), len(centre)))
    pull = solve_triangular(root, z, lower=True, trans="T")
    known = node.family.covariance(node.own, node.X, anchors)[0] @ pull
    coefficients = np.concatenate([centre.T - node.Q[0] @ known, pull])
    return _Law(node, np.concatenate([node.X, anchors]), coefficients)


def _centres(
    surface: Surface, draws: int
) -> Iterator[tuple[ProcessNodes | PolynomialNodes, Array]]:
    """Single nodes, and the coefficients (m, K) of the mean about which each draw is drawn."""
    every = surface if surface.cloud is None else surface.cloud
    most = draws if surface.cloud is not None else min(draws, _MOST_NODES)
    picked = _systematic(every.weights, most)[np.arange(draws) * most // draws]
    ends = np.cumsum([0, *(len(part) for part in every.parts)])
    for part, (first, stop) in zip(every.parts, pairwise(ends), strict=True):
        yield from _of_part(part, picked[(picked >= first) & (picked < stop)] - first)


def _of_part(part: Nodes, index: Index) -> Iterator[tuple[ProcessNodes | PolynomialNodes, Array]]:
    owner = part.node[index] if isinstance(part, DrawnPolynomial | DrawnProcess) else index
    for k in np.unique(owner):
        one, mine = np.array([k]), index[owner == k]
        if isinstance(part, DrawnPolynomial):
            yield part.given.take(one), part.drawn[mine]
        elif isinstance(part, DrawnProcess):
            yield part.given.take(one), part.drawn[mine] @ part.inverse[k]
        elif isinstance(part, PolynomialNodes):
            yield part.take(one), np.repeat(part.mean[one], len(mine), axis=0)
        elif isinstance(part, ProcessNodes):
            yield part.take(one), np.repeat(part.alpha[one], len(mine), axis=0)
        else:
            raise TypeError(f"no draws of {type(part).__name__}")


def _systematic(weights: Array, draws: int) -> Index:
    """Positions (draws,) by their weights, evenly spaced and ascending (Kitagawa 1996)."""
    reached = np.cumsum(weights)
    ticks = (np.arange(draws) + 0.5) / draws * reached[-1]
    return np.minimum(np.searchsorted(reached, ticks), len(weights) - 1)
