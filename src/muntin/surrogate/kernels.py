"""Covariance functions and the polynomial basis, over coded factors, batched over nodes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.coding import Columns

Array = NDArray[np.float64]
_ROOT5 = np.sqrt(5.0)


def squared_distance(X: Array, Z: Array, lengths: Array) -> Array:
    """Scaled squared distances r^2 (S, n, m) of X (n, D) and Z (m, D); lengths (S, D) a node."""
    A = X[None] / lengths[:, None, :]
    B = Z[None] / lengths[:, None, :]
    cross = A @ np.swapaxes(B, 1, 2)
    r2 = (A * A).sum(-1)[:, :, None] + (B * B).sum(-1)[:, None, :]
    cross *= -2.0
    cross += r2
    return np.maximum(cross, 0.0, out=cross)


def matern52(r2: Array) -> Array:
    """Matern-5/2 correlation (Rasmussen & Williams 2006, eq. 4.17) of squared distances."""
    r = _ROOT5 * np.sqrt(r2)
    value = np.exp(-r)
    value *= 1.0 + r + r * r / 3.0
    return value


def matern52_slope(r2: Array) -> Array:
    """-2 dk/d(r^2) of the Matern-5/2 correlation: (5/3) (1 + sqrt5 r) exp(-sqrt5 r)."""
    r = _ROOT5 * np.sqrt(r2)
    return (5.0 / 3.0) * (1.0 + r) * np.exp(-r)


def same_group(a: NDArray[np.intp], b: NDArray[np.intp]) -> Array:
    """Exchangeable correlation: 1 where the groups a (n,) and b (m,) agree, else 0."""
    return (a[:, None] == b[None, :]).astype(float)


def quadratic_terms(columns: Columns) -> list[tuple[int, ...]]:
    """Column indices of each term of the full second-order polynomial: (), (i,), (i, j).

    Squares and products within a factor of choices are left out: over the corners of a simplex
    they repeat what the linear contrasts already say.
    """
    count = range(len(columns.factor))
    crossed = [(i, j) for i in count for j in count if i < j]
    between = [(i, j) for i, j in crossed if columns.factor[i] != columns.factor[j]]
    return [(), *((i,) for i in count), *((i, i) for i in count if columns.curved[i]), *between]


def polynomial_basis(X: Array, terms: list[tuple[int, ...]]) -> Array:
    """Values (n, p) of the polynomial terms at coded X (n, D)."""
    return np.stack([np.prod(X[:, list(term)], axis=1) for term in terms], axis=1)


def polynomial_slopes(X: Array, terms: list[tuple[int, ...]]) -> Array:
    """Slopes (n, p, D) of the polynomial terms with each column of coded X (n, D)."""
    out = np.zeros((len(X), len(terms), X.shape[1]))
    for t, term in enumerate(terms):
        for column in set(term):
            rest = list(term)
            rest.remove(column)
            out[:, t, column] = term.count(column) * np.prod(X[:, rest], axis=1)
    return out
