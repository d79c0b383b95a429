"""Few nodes that speak for many.

Weights are found again on as few nodes as there are averages to keep: chances that the process mean
lies below levels spread over its law, at conditions spread over the range, that the ceiling lies
below levels spread over its own, and means and squares of the log error sds. A non-negative
least-squares solution has no more nodes than averages (Lawson & Hanson 1995, chapter 23; Tchakaloff
1957).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.cells import Cells
from muntin.surrogate.coding import Columns
from muntin.surrogate.links import latent_of, mean_of
from muntin.surrogate.nodes import Surface

Array = NDArray[np.float64]
_PROBES = 22
_LEVELS = (-1.1, 0.0, 1.4)
_SHARES = (
    *(0.03, 0.08, 0.16, 0.26, 0.37, 0.48, 0.58, 0.67, 0.75),
    *(0.82, 0.875, 0.915, 0.945, 0.968, 0.987),
)
# How much the sums to one and the error sds count beside a chance.
_ONE, _ERRORS = 10.0, 0.3


def compressed(surface: Surface, columns: Columns, cells: Cells) -> Surface:
    """The surface on fewer of its nodes; as it is where it has few."""
    from scipy.optimize import nnls

    kept = _kept(surface, _probes(columns, cells.X))
    if len(surface.weights) <= len(kept):
        return surface
    weights, _ = nnls(kept, kept @ surface.weights, maxiter=50 * kept.shape[1])
    index = np.flatnonzero(weights > 1e-9)
    return surface.take(index, weights[index] / weights[index].sum())


def _probes(columns: Columns, X: Array) -> Array:
    """Coded conditions (_PROBES, D): Sobol' points of the range, choices as in the rows of X."""
    from scipy.stats.qmc import Sobol

    D = X.shape[1]
    points = 2.0 * Sobol(D, rng=np.random.default_rng(0)).random_base2(5)[:_PROBES] - 1.0
    rows = X[np.arange(_PROBES) % len(X)]
    return np.where(np.array(columns.curved), points, rows)


def _kept(surface: Surface, X: Array) -> Array:
    """The quantities (K, S) at each node whose averages are kept."""
    weights, errors, link = surface.weights, surface.errors, surface.link
    mean, variance = surface.moments(X)
    centre = weights @ mean
    spread = np.sqrt(weights @ (variance + (mean - centre) ** 2))
    usual, own = float(weights @ errors.ceiling), errors.ceiling[:, None]
    rows = [np.full((len(weights), 1), _ONE)]
    from scipy.special import ndtr

    for level in _LEVELS:
        value = mean_of(link, centre + level * spread, usual)
        rows.append(ndtr((latent_of(link, value, own) - mean) / np.sqrt(variance)))
    order = np.argsort(errors.ceiling)
    reached = np.cumsum(weights[order]) - 0.5 * weights[order]
    levels = np.interp(_SHARES, reached, errors.ceiling[order])
    rows.append((own <= levels).astype(float))
    logs = np.log(np.maximum(np.column_stack([errors.noise, errors.inside, errors.scale]), 1e-9))
    away = logs - weights @ logs
    away = _ERRORS * away / np.maximum(np.sqrt(weights @ away**2), 1e-9)
    return np.concatenate([*rows, away, away**2], axis=1).T
