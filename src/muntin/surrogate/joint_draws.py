"""Joint posterior draws of a latent surface: whole functions, each of which can be asked anywhere."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.drawn import DrawnPolynomial, DrawnProcess
from muntin.surrogate.influence import covariance_root
from muntin.surrogate.links import Link
from muntin.surrogate.nodes import Errors, Nodes, Surface

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Nodes that speak where there is no cloud; each has its share of the draws.
_MOST_NODES = 128


@dataclass(frozen=True, eq=False)
class _Law:
    """Some of the draws: those about one law of f.

    centre: nodes whose means of f the draws lie about, one for all of them or one each. law: one
    node, whose covariance spreads them. pull (A, m): what its covariance with the anchors is
    multiplied with.
    """

    centre: Nodes
    law: Nodes
    pull: Array

    def at(self, X: Array, anchors: Array) -> Array:
        """The m draws of f (m, n) at coded X (n, D)."""
        return self.centre.moments(X)[0] + (self.law.covariance(X, anchors)[0] @ self.pull).T


@dataclass(frozen=True, eq=False)
class JointDraws:
    """N equally likely draws of the latent surface of one response.

    Each was drawn at the anchors (A, D), coded; elsewhere it is the mean of f given its values
    there. order (N,): where each draw stands among those of the laws, so that the draws of two
    responses pair at random.
    """

    link: Link
    anchors: Array
    laws: tuple[_Law, ...]
    order: Index

    def at(self, X: Array) -> Array:
        """The latent f (N, n) at coded X (n, D)."""
        return np.concatenate([law.at(X, self.anchors) for law in self.laws])[self.order]

    def wander(self, X: Array, setting: Array) -> Array:
        """Latent variance (N, n) of a well at coded X (n, D) set with sds `setting` (n, D)."""
        every = [((law.law.slopes(X) * setting) ** 2).sum(-1) for law in self.laws]
        return np.concatenate(every)[self._owner]

    @property
    def errors(self) -> Errors:
        """Sds of the errors of a well, draw by draw (N, ...)."""
        every = [law.law.errors for law in self.laws]
        return Errors(
            np.concatenate([e.noise for e in every])[self._owner],
            np.concatenate([e.inside for e in every])[self._owner],
            np.concatenate([e.scale for e in every])[self._owner],
            np.concatenate([e.ceiling for e in every])[self._owner],
        )

    @property
    def _owner(self) -> Index:
        """The law (N,) that each draw is of."""
        return np.repeat(np.arange(len(self.laws)), [x.pull.shape[1] for x in self.laws])[
            self.order
        ]


def draw_jointly(
    surface: Surface, anchors: Array, draws: int, rng: np.random.Generator
) -> JointDraws:
    """Draws of f, jointly over the responses' shared hyperparameters, at coded anchors (A, D).

    From the cloud of a surface where it has one, else from up to 128 of its nodes; which, by
    systematic resampling of their weights.
    """
    from scipy.linalg import solve_triangular

    laws = []
    for centre, law, count in _laws(surface, draws):
        root = covariance_root(law.covariance(anchors, anchors)[0])
        z = rng.standard_normal((len(anchors), count))
        laws.append(_Law(centre, law, solve_triangular(root, z, lower=True, trans="T")))
    return JointDraws(surface.link, anchors, tuple(laws), rng.permutation(draws))


def _laws(surface: Surface, draws: int) -> Iterator[tuple[Nodes, Nodes, int]]:
    """Centres, law and number of draws, law by law."""
    every = surface if surface.cloud is None else surface.cloud
    most = draws if surface.cloud is not None else min(draws, _MOST_NODES)
    index, count = np.unique(
        _systematic(every.weights, most)[_even(draws, most)], return_counts=True
    )
    start = 0
    ends = np.cumsum([0, *(len(part) for part in every.parts)])
    for part, (first, stop) in zip(every.parts, pairwise(ends), strict=True):
        mine = (index >= first) & (index < stop)
        yield from _of_part(part, index[mine] - first, count[mine])


def _of_part(part: Nodes, index: Index, count: Index) -> Iterator[tuple[Nodes, Nodes, int]]:
    if not isinstance(part, DrawnPolynomial | DrawnProcess):
        for i, m in zip(index, count, strict=True):
            one = part.take(np.array([i]))
            yield one, one, int(m)
        return
    node = part.node[index]
    for k in np.unique(node):
        rows = np.repeat(index[node == k], count[node == k])
        yield part.take(rows), part.given.take(np.array([k])), len(rows)


def _systematic(weights: Array, draws: int) -> Index:
    """Draws (draws,) of positions by their weights, evenly spaced (Kitagawa 1996)."""
    reached = np.cumsum(weights)
    ticks = (np.arange(draws) + 0.5) / draws * reached[-1]
    return np.minimum(np.searchsorted(reached, ticks), len(weights) - 1)


def _even(draws: int, most: int) -> Index:
    """Which of `most` each of the draws (draws,) belongs to, as evenly as can be."""
    return np.arange(draws) * most // draws
