"""Nodes about draws of the latent values: many at each set of hyperparameters."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Generic, Self, TypeVar

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.nodes import Errors, Latent, PolynomialNodes, ProcessNodes

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Given = TypeVar("Given", PolynomialNodes, ProcessNodes)


@dataclass(frozen=True)
class _Drawn(ABC, Generic[Given]):
    """N draws at S nodes.

    given: S laws, whose variances and covariances hold for every draw about it, and whose slopes do
    as nearly as setting errors ask. node (N,), ascending: the law of each draw. drawn (N, W): what
    the mean of f loads on.
    """

    given: Given
    node: Index
    drawn: Array

    def __len__(self) -> int:
        return len(self.node)

    @property
    def errors(self) -> Errors:
        """Sds of the errors of a future well."""
        return self.given.errors.nodes(self.node)

    @abstractmethod
    def moments(self, X: Array) -> tuple[Array, Array]:
        """Mean and variance (N, n) of f at coded X (n, D)."""

    def covariance(self, X: Array, Z: Array) -> Array:
        """Covariance (N, n, m) of f between coded X (n, D) and Z (m, D)."""
        return self.given.covariance(X, Z)[self.node]

    def latent(self, X: Array) -> Latent:
        """Mean, variance and skewness (N, n), which is none, of f at coded X (n, D)."""
        mean, variance = self.moments(X)
        return Latent(mean, variance, np.zeros_like(mean))

    def slopes(self, X: Array) -> Array:
        """Slope (N, n, D) of the mean of f, over a node's draws, with coded X (n, D)."""
        return self.given.slopes(X)[self.node]

    def take(self, index: Index) -> Self:
        """Some of the draws, in ascending order, with the laws that they need."""
        used, node = np.unique(self.node[index], return_inverse=True)
        return replace(self, given=self.given.take(used), node=node, drawn=self.drawn[index])


@dataclass(frozen=True)
class DrawnPolynomial(_Drawn[PolynomialNodes]):
    """Draws (N, p) of the quadratic's coefficients."""

    def moments(self, X: Array) -> tuple[Array, Array]:
        """Mean and variance (N, n) of f at coded X (n, D)."""
        family = self.given.family
        mean = self.drawn @ family.basis(X).T + family.priors.mean
        return mean, self.given.moments(X)[1][self.node]


@dataclass(frozen=True)
class DrawnProcess(_Drawn[ProcessNodes]):
    """Draws (N, U) of the Gaussian process's whitened latent values.

    inverse (S, U, U): of the prior's root, and V (S, U, U): covariance of the whitened values about
    each draw; with these the mean and the variance of f are not small differences of large numbers.
    """

    inverse: Array
    V: Array

    def take(self, index: Index) -> DrawnProcess:
        """Some of the draws, in ascending order, with the laws that they need."""
        used = np.unique(self.node[index])
        return replace(super().take(index), inverse=self.inverse[used], V=self.V[used])

    def moments(self, X: Array) -> tuple[Array, Array]:
        """Mean and variance (N, n) of f at coded X (n, D)."""
        family, own = self.given.family, self.given.own
        loading = family.covariance(own, X, self.given.X) @ np.swapaxes(self.inverse, 1, 2)
        left = family.variance(own, X) - (loading**2).sum(-1)
        left += np.einsum("snu,snu->sn", loading @ self.V, loading)
        mean = np.empty((len(self), len(X)))
        ends = np.searchsorted(self.node, np.arange(len(own) + 1))
        for rows, (start, stop) in zip(loading, pairwise(ends), strict=True):
            mean[start:stop] = self.drawn[start:stop] @ rows.T
        return mean + family.priors.mean, np.maximum(left, 1e-12)[self.node]
