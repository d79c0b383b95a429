"""Influence of factors: Sobol' indices of functions on a product grid, and joint posterior draws
of a surface there.

The grid is a product of one-dimensional rules, so that every average over some of the factors is a
weighted sum and the indices carry no sampling error of their own.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.coding import Coding, Continuous
from muntin.surrogate.links import mean_of
from muntin.surrogate.nodes import Surface

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Points a factor with a range, by the number of such factors; fewer where choices multiply them.
_POINTS = (21, 21, 11, 7, 6, 5)
_LEAST, _MOST = 3, 16_000
# Fewer nodes where the grid is large, for the sake of time: about so many points over all nodes.
_FEW_NODES, _NODES, _NODE_POINTS = 16, 32, 100_000
_ANCHORS, _CHUNK = 800, 4096
_FLAT, _JITTER = 1e-9, 1e-10


@dataclass(frozen=True)
class ProductGrid:
    """A rule a factor: coded levels (k_i, width_i) and weights (k_i,), which sum to 1."""

    levels: tuple[Array, ...]
    weights: tuple[Array, ...]

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of levels of each factor."""
        return tuple(len(w) for w in self.weights)

    @property
    def size(self) -> int:
        """Number of grid points."""
        return int(np.prod([float(k) for k in self.shape]))

    def points(self) -> Array:
        """Coded points (size, D); the level of the last factor changes fastest."""
        index = np.indices(self.shape).reshape(len(self.shape), -1)
        return np.concatenate([v[i] for v, i in zip(self.levels, index, strict=True)], axis=1)


@dataclass(frozen=True)
class Effects:
    """What each of F factors does to each of N functions, arrays (N, F).

    first: S_i = V(E(g | x_i)) / V(g); total: ST_i = E(V(g | x_-i)) / V(g) (Sobol' 1993; notation
    of Saltelli et al. 2010); both 0 where g is constant up to rounding. change: largest less
    smallest g along factor i, averaged over the settings of the other factors, unit of g.
    """

    first: Array
    total: Array
    change: Array


def lobatto(points: int) -> tuple[Array, Array]:
    """Gauss-Lobatto points (points,) of [-1, 1], ends among them, and weights that sum to 1.

    Exact for polynomials to degree 2 points - 3 (Abramowitz & Stegun 1964, 25.4.32).
    """
    legendre = np.polynomial.Legendre.basis(points - 1)
    x = np.concatenate([[-1.0], np.sort(legendre.deriv().roots().real), [1.0]])
    return x, 1.0 / (points * (points - 1) * legendre(x) ** 2)


def product_grid(coding: Coding) -> ProductGrid:
    """The grid over the coded range of all factors: uniform over what is coded -1 to 1, which is
    the raw range or its logarithm; choices equally likely, each of them a level. On a steep
    logistic surface the indices are then exact to 0.004 up to four factors and to 0.02 beyond.
    """
    points = _points_of(coding)
    x, w = lobatto(points)
    levels, weights = [], []
    for factor in coding.factors:
        if isinstance(factor, Continuous):
            levels.append(x[:, None])
            weights.append(w)
        else:
            levels.append(factor.corners())
            weights.append(np.full(factor.levels, 1.0 / factor.levels))
    return ProductGrid(tuple(levels), tuple(weights))


def _points_of(coding: Coding) -> int:
    ranged = sum(isinstance(f, Continuous) for f in coding.factors)
    others = np.prod([1.0, *(f.levels for f in coding.factors if not isinstance(f, Continuous))])
    points = _POINTS[min(max(ranged, 1), len(_POINTS)) - 1]
    while points > _LEAST and others * float(points) ** ranged > _MOST:
        points -= 1
    return points


def effects(values: Array, weights: Sequence[Array]) -> Effects:
    """Effects of functions with values (N, k_1, ..., k_F) on a grid with weights (k_i,)."""
    axes = range(len(weights))
    largest = np.abs(values).reshape(len(values), -1).max(axis=1)
    centred = values - _averaged(values, weights, axes)
    variance = _averaged(centred**2, weights, axes).reshape(-1)
    flat = variance <= (_FLAT * largest) ** 2
    unit = np.where(flat, 1.0, variance)
    first, total, change = [], [], []
    for i in axes:
        others = [j for j in axes if j != i]
        main = _averaged(centred, weights, others)
        first.append(_averaged(main**2, weights, axes).reshape(-1) / unit)
        left = centred - _averaged(centred, weights, [i])
        total.append(_averaged(left**2, weights, axes).reshape(-1) / unit)
        moved = np.ptp(values, axis=1 + i, keepdims=True)
        change.append(_averaged(moved, weights, others).reshape(-1))
    keep = ~flat[:, None]
    return Effects(
        np.stack(first, axis=1) * keep, np.stack(total, axis=1) * keep, np.stack(change, axis=1)
    )


def _averaged(values: Array, weights: Sequence[Array], over: Sequence[int]) -> Array:
    """Weighted mean over some factors, whose axes stay with length 1."""
    for i in over:
        if values.shape[1 + i] > 1:
            values = np.moveaxis(np.moveaxis(values, 1 + i, -1) @ weights[i][:, None], -1, 1 + i)
    return values


def surface_effects(
    surface: Surface, grid: ProductGrid, draws: int, rng: np.random.Generator
) -> Effects:
    """Effects (draws, F) of joint posterior draws of the process mean g(f), natural unit, from 16
    to 32 of the nodes.
    """
    parts = [
        effects(g.reshape(len(g), *grid.shape), grid.weights)
        for g in _node_draws(surface, grid.points(), draws, rng)
    ]
    return Effects(
        np.concatenate([p.first for p in parts]),
        np.concatenate([p.total for p in parts]),
        np.concatenate([p.change for p in parts]),
    )


def joint_draws(surface: Surface, X: Array, draws: int, rng: np.random.Generator) -> Array:
    """Joint posterior draws (draws, n) of the process mean g(f) at coded X (n, D), natural unit."""
    return np.concatenate(list(_node_draws(surface, X, draws, rng)))


def _node_draws(
    surface: Surface, X: Array, draws: int, rng: np.random.Generator
) -> Iterator[Array]:
    """Draws (m, n) of g(f), node by node: nodes by systematic resampling, each with its share."""
    nodes = min(_NODES, max(_FEW_NODES, _NODE_POINTS // len(X)))
    light = surface.lightened(min(nodes, draws))
    ticks = (np.arange(draws) + 0.5) / draws
    picked = np.searchsorted(np.cumsum(light.weights), ticks * light.weights.sum())
    counts = np.bincount(np.minimum(picked, len(light.weights) - 1), minlength=len(light.weights))
    anchors = _anchors(len(X), rng)
    for i in np.flatnonzero(counts):
        node = light.take(np.array([i]), np.ones(1))
        z = rng.standard_normal((len(anchors), counts[i]))
        f = node.moments(X)[0] + _spread(node, X, anchors, z)
        yield mean_of(surface.link, f, node.errors.ceiling)


def _anchors(n: int, rng: np.random.Generator) -> Index:
    """The points at which f is drawn: all where they are few enough, else a random choice."""
    return np.arange(n) if n <= _ANCHORS else np.sort(rng.permutation(n)[:_ANCHORS])


def _spread(node: Surface, X: Array, anchors: Index, z: Array) -> Array:
    """Deviations (m, n) of f from its mean at one node, from standard normal z (anchors, m).

    With C the covariance and L L' = C_aa: C_xa L'^-1 z, which at the anchors a is L z, and
    elsewhere the mean of f given the deviations there. Where X is its own anchors it is exact.
    """
    from scipy.linalg import solve_triangular

    C = np.empty((len(X), len(anchors)))
    for start in range(0, len(X), _CHUNK):
        rows = slice(start, start + _CHUNK)
        C[rows] = node.covariance(X[rows], X[anchors])[0]
    white = solve_triangular(covariance_root(C[anchors]), z, lower=True, trans="T")
    return (C @ white).T


def covariance_root(covariance: Array) -> Array:
    """Cholesky factor of a covariance that rounding may leave short of positive definite."""
    scale = max(float(np.abs(covariance).max()), np.finfo(float).tiny)
    jitter, step = _JITTER * scale, np.eye(len(covariance))
    while jitter < scale:
        try:
            return np.asarray(np.linalg.cholesky(covariance + jitter * step), dtype=float)
        except np.linalg.LinAlgError:
            jitter *= 10.0
    return np.asarray(np.linalg.cholesky(covariance + len(step) * scale * step), dtype=float)
