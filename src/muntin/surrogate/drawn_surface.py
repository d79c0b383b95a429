"""One surface drawn from the posterior of a response: a function that can be asked anywhere."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.influence import covariance_root
from muntin.surrogate.links import mean_of
from muntin.surrogate.nodes import Errors, Surface

Array = NDArray[np.float64]
_CHUNK = 2048


@dataclass(frozen=True, eq=False)
class DrawnSurface:
    """One latent surface at one node.

    node: the surface of that node alone. support (M, D): coded conditions at which it was drawn.
    pull (M,): what their covariance with a condition is multiplied with. Between the support the
    surface is its mean given the values drawn there.
    """

    node: Surface
    support: Array
    pull: Array

    def at(self, X: Array) -> Array:
        """The latent f (n,) at coded X (n, D)."""
        out = np.empty(len(X))
        for start in range(0, len(X), _CHUNK):
            rows = slice(start, start + _CHUNK)
            mean = self.node.moments(X[rows])[0][0]
            out[rows] = mean + self.node.covariance(X[rows], self.support)[0] @ self.pull
        return out

    def process_mean(self, X: Array) -> Array:
        """The process mean g(f) (n,) at coded X (n, D), natural unit."""
        return mean_of(self.node.link, self.at(X), float(self.node.errors.ceiling[0]))

    @property
    def errors(self) -> Errors:
        """Sds of the errors of a well, at that one node."""
        return self.node.errors


def one_node(surface: Surface, u: float) -> Surface:
    """The node of a surface, or of its cloud where it has one, at u (0 to 1) of the weights."""
    every = surface if surface.cloud is None else surface.cloud
    reached = np.cumsum(every.weights)
    index = min(int(np.searchsorted(reached, u * reached[-1], side="right")), len(reached) - 1)
    return every.take(np.array([index]), np.ones(1))


def draw_surface(node: Surface, support: Array, rng: np.random.Generator) -> DrawnSurface:
    """Draw f jointly at coded support (M, D) from the Gaussian law of a surface of one node."""
    from scipy.linalg import solve_triangular

    root = covariance_root(node.covariance(support, support)[0])
    z = rng.standard_normal(len(support))
    return DrawnSurface(node, support, solve_triangular(root, z, lower=True, trans="T"))
