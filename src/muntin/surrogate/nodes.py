"""Weighted nodes: the one posterior on which everything downstream rests.

A node is a law of the latent surface f at one set of hyperparameters, Gaussian but for a skewness;
it knows the mean, variance and covariance of f anywhere, and the sds of the errors that a future
well would meet.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.kernels import polynomial_slopes
from muntin.surrogate.links import Link, latent_of
from muntin.surrogate.polynomial import Quadratic
from muntin.surrogate.process import GaussianProcess
from muntin.surrogate.skewness import Skew

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_CHUNK = 300_000


@dataclass(frozen=True)
class Errors:
    """How a reading comes about at S nodes.

    Sd of its noise (S,); sds of each inside and scale error (S, J), latent and relative units; the
    ceiling (S,) at which a fraction levels off.
    """

    noise: Array
    inside: Array
    scale: Array
    ceiling: Array

    def nodes(self, index: Index) -> Errors:
        """The errors of some nodes."""
        return Errors(self.noise[index], self.inside[index], self.scale[index], self.ceiling[index])


class Latent(NamedTuple):
    """Mean, variance and skewness (S, n) of f at n conditions; a skewness of 0 says Gaussian."""

    mean: Array
    variance: Array
    skew: Array


class Nodes(Protocol):
    """S laws of f over coded conditions, Gaussian but for a skewness."""

    @property
    def errors(self) -> Errors:
        """Sds of the errors of a future well."""

    def __len__(self) -> int: ...

    def moments(self, X: Array) -> tuple[Array, Array]:
        """Mean and variance (S, n) of f at coded X (n, D)."""

    def covariance(self, X: Array, Z: Array) -> Array:
        """Covariance (S, n, m) of f between coded X (n, D) and Z (m, D)."""

    def latent(self, X: Array) -> Latent:
        """Mean, variance and skewness (S, n) of f at coded X (n, D)."""

    def slopes(self, X: Array) -> Array:
        """Slope (S, n, D) of the mean of f with each coded column at X (n, D)."""

    def take(self, index: Index) -> Nodes:
        """Some of the nodes."""


@dataclass(frozen=True)
class ProcessNodes:
    """Nodes of the Gaussian process: own hyperparameters (S, H), inputs X (U, D), alpha, Q, and
    the skew for covariances with f at X; None says none.
    """

    family: GaussianProcess
    own: Array
    X: Array
    alpha: Array
    Q: Array
    errors: Errors
    skew: Skew | None = None

    def __len__(self) -> int:
        return len(self.own)

    def moments(self, X: Array) -> tuple[Array, Array]:
        """Mean and variance (S, n) of f at coded X (n, D)."""
        plain = self if self.skew is None else replace(self, skew=None)
        return plain.latent(X)[:2]

    def covariance(self, X: Array, Z: Array) -> Array:
        """Covariance (S, n, m) of f between coded X (n, D) and Z (m, D)."""
        left = self.family.covariance(self.own, X, self.X)
        right = self.Q @ np.swapaxes(self.family.covariance(self.own, Z, self.X), 1, 2)
        return self.family.covariance(self.own, X, Z) - left @ right

    def latent(self, X: Array) -> Latent:
        """Mean, variance and skewness (S, n) of f at coded X (n, D)."""
        mean, third = np.empty((len(self), len(X))), np.zeros((len(self), len(X)))
        variance = self.family.variance(self.own, X)
        size = max(1, _CHUNK // max(1, len(self) * len(self.X)))
        for rows in _chunks(len(X), size):
            k = self.family.covariance(self.own, X[rows], self.X)
            mean[:, rows] = (k @ self.alpha[..., None])[..., 0]
            variance[:, rows] -= np.einsum("snu,snu->sn", k @ self.Q, k)
            if self.skew is not None:
                third[:, rows] = self.skew.cumulant(k)
        variance = _positive(variance)
        return Latent(mean + self.family.priors.mean, variance, third / variance**1.5)

    def slopes(self, X: Array) -> Array:
        """Slope (S, n, D) of the mean of f with each coded column at X (n, D)."""
        size = max(1, _CHUNK // max(1, len(self) * len(self.X)))
        parts = [
            self.family.slopes(self.own, X[rows], self.X, self.alpha)
            for rows in _chunks(len(X), size)
        ]
        return np.concatenate(parts, axis=1) if parts else np.zeros((len(self), *X.shape))

    def take(self, index: Index) -> ProcessNodes:
        """Some of the nodes."""
        return replace(
            self,
            own=self.own[index],
            alpha=self.alpha[index],
            Q=self.Q[index],
            errors=self.errors.nodes(index),
            skew=None if self.skew is None else self.skew.take(index),
        )


@dataclass(frozen=True)
class PolynomialNodes:
    """Nodes of the quadratic: coefficient means (S, p) and covariances (S, p, p), and the skew for
    the polynomial terms; None says none.
    """

    family: Quadratic
    mean: Array
    V: Array
    errors: Errors
    skew: Skew | None = None

    def __len__(self) -> int:
        return len(self.mean)

    def moments(self, X: Array) -> tuple[Array, Array]:
        """Mean and variance (S, n) of f at coded X (n, D)."""
        B = self.family.basis(X)
        mean = self.mean @ B.T + self.family.priors.mean
        return mean, _positive(np.einsum("snp,np->sn", B @ self.V, B))

    def covariance(self, X: Array, Z: Array) -> Array:
        """Covariance (S, n, m) of f between coded X (n, D) and Z (m, D)."""
        return self.family.basis(X) @ self.V @ self.family.basis(Z).T

    def latent(self, X: Array) -> Latent:
        """Mean, variance and skewness (S, n) of f at coded X (n, D)."""
        mean, variance = self.moments(X)
        if self.skew is None:
            return Latent(mean, variance, np.zeros_like(mean))
        B = self.family.basis(X)
        third = self.skew.cumulant(np.broadcast_to(B, (len(self), *B.shape)))
        return Latent(mean, variance, third / variance**1.5)

    def slopes(self, X: Array) -> Array:
        """Slope (S, n, D) of the mean of f with each coded column at X (n, D)."""
        return np.einsum("sp,npd->snd", self.mean, polynomial_slopes(X, self.family.terms))

    def take(self, index: Index) -> PolynomialNodes:
        """Some of the nodes."""
        return replace(
            self,
            mean=self.mean[index],
            V=self.V[index],
            errors=self.errors.nodes(index),
            skew=None if self.skew is None else self.skew.take(index),
        )


@dataclass(frozen=True)
class Surface:
    """The posterior of one response: weighted nodes, one part a surrogate, and the link.

    weights (S,) run over the nodes of all parts in order and sum to 1. cloud: weighted draws that
    tell the law of f better than the nodes do; None where there are none.
    """

    parts: tuple[Nodes, ...]
    weights: Array
    link: Link
    cloud: Surface | None = None

    def moments(self, X: Array) -> tuple[Array, Array]:
        """Mean and variance (S, n) of the latent f at coded X (n, D)."""
        moments = [part.moments(X) for part in self.parts]
        return np.concatenate([m for m, _ in moments]), np.concatenate([v for _, v in moments])

    def latent(self, X: Array) -> Latent:
        """Mean, variance and skewness (S, n) of the latent f at coded X (n, D)."""
        every = [part.latent(X) for part in self.parts]
        return Latent(*(np.concatenate(values) for values in zip(*every, strict=True)))

    def covariance(self, X: Array, Z: Array) -> Array:
        """Covariance (S, n, m) of the latent f between coded X (n, D) and Z (m, D)."""
        return np.concatenate([part.covariance(X, Z) for part in self.parts])

    def slopes(self, X: Array) -> Array:
        """Slope (S, n, D) of each node's mean of the latent f with coded X (n, D)."""
        return np.concatenate([part.slopes(X) for part in self.parts])

    def wander(self, X: Array, setting: Array) -> Array:
        """Latent variance (S, n) of a well at coded X (n, D) set with sds `setting` (n, D)."""
        return np.asarray(((self.slopes(X) * setting) ** 2).sum(-1))

    @property
    def errors(self) -> Errors:
        """Sds of the errors that a future well meets."""
        every = [part.errors for part in self.parts]
        return Errors(
            np.concatenate([e.noise for e in every]),
            np.concatenate([e.inside for e in every]),
            np.concatenate([e.scale for e in every]),
            np.concatenate([e.ceiling for e in every]),
        )

    def thresholds(self, value: float) -> Array:
        """Latent values (S, 1) at which the process mean is `value` (natural unit)."""
        ceiling = self.errors.ceiling[:, None]
        return np.broadcast_to(latent_of(self.link, value, ceiling), ceiling.shape)

    def lightened(self, most: int) -> Surface:
        """The surface on at most so many nodes: systematic resampling, weights by count."""
        if len(self.weights) <= most:
            return self
        ticks = (np.arange(most) + 0.5) / most
        picked = np.searchsorted(np.cumsum(self.weights), ticks * self.weights.sum())
        index, count = np.unique(np.minimum(picked, len(self.weights) - 1), return_counts=True)
        return self.take(index, count / most)

    def take(self, index: Index, weights: Array) -> Surface:
        """Some of the nodes, in ascending order, with new weights and without the cloud."""
        parts, start = [], 0
        for part in self.parts:
            mine = index[(index >= start) & (index < start + len(part))] - start
            if len(mine):
                parts.append(part.take(mine))
            start += len(part)
        return Surface(tuple(parts), weights, self.link)


def mixture(surfaces: Sequence[Surface], shares: Array) -> Surface:
    """The union of surfaces of one response, each weighted by its share; with a cloud where all
    have one.
    """
    kept = [(s, share) for s, share in zip(surfaces, shares, strict=True) if share > 0.0]
    clouds = [s.cloud for s, _ in kept if s.cloud is not None]
    cloud = None
    if len(clouds) == len(kept):
        cloud = mixture(clouds, np.array([share for _, share in kept]))
    return Surface(
        tuple(part for s, _ in kept for part in s.parts),
        np.concatenate([share * s.weights for s, share in kept]),
        surfaces[0].link,
        cloud,
    )


def _chunks(n: int, size: int) -> Iterator[slice]:
    return (slice(i, min(i + size, n)) for i in range(0, n, size))


def _positive(variance: Array) -> Array:
    return np.maximum(variance, 1e-12)
