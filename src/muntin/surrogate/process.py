"""The Gaussian process surrogate: a constant and a Matern-5/2 process, one length a factor."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.cells import Cells
from muntin.surrogate.coding import Columns
from muntin.surrogate.kernels import matern52, matern52_slope, same_group, squared_distance
from muntin.surrogate.layout import Layout
from muntin.surrogate.priors import LogNormal, Priors

Array = NDArray[np.float64]
JITTER = 1e-10


@dataclass(frozen=True)
class GaussianProcess:
    """Prior of the latent surface: k(x, x') = mean_sd^2 + process_sd^2 Matern(x, x')."""

    columns: Columns
    priors: Priors
    name: str = "gp"

    def own(self) -> tuple[tuple[str, LogNormal], ...]:
        """Names and priors of the family's hyperparameters: process sd, then lengths."""
        lengths = [
            (f"length_scale[{i}]", self.priors.length_scale) for i in range(self.columns.factors)
        ]
        return (("process_sd", self.priors.process_sd), *lengths)

    def covariance(self, own: Array, X: Array, Z: Array) -> Array:
        """Prior covariance (S, n, m) of f between coded X (n, D) and Z (m, D)."""
        lengths = own[:, 1:][:, list(self.columns.factor)]
        value = matern52(squared_distance(X, Z, lengths))
        value *= own[:, 0, None, None] ** 2
        value += self.priors.mean_sd**2
        return value

    def slopes(self, own: Array, X: Array, Z: Array, alpha: Array) -> Array:
        """Slopes (S, n, D) with x of k(x, Z) alpha at coded X (n, D); alpha (S, m), Z (m, D)."""
        lengths = own[:, 1:][:, list(self.columns.factor)]
        B = matern52_slope(squared_distance(X, Z, lengths))
        B *= own[:, 0, None, None] ** 2 * alpha[:, None, :]
        return (B @ Z - B.sum(-1)[..., None] * X) / lengths[:, None, :] ** 2

    def variance(self, own: Array, X: Array) -> Array:
        """Prior variance (S, n) of f at coded X (n, D)."""
        value = self.priors.mean_sd**2 + own[:, :1] ** 2
        return np.repeat(value, len(X), axis=1)

    def root(self, layout: Layout, theta: Array, cells: Cells) -> Array:
        """L (S, U, U) with L L' the prior covariance of the latent values, inside errors too."""
        own = layout.family(theta)
        K = self.covariance(own, cells.X, cells.X)
        for j, sd in enumerate(layout.inside_sd(theta).T):
            groups = cells.inside[:, j]
            K += sd[:, None, None] ** 2 * same_group(groups, groups)
        index = np.arange(K.shape[1])
        K[:, index, index] += JITTER * own[:, :1] ** 2
        return np.asarray(np.linalg.cholesky(K), dtype=float)

    def gradient(self, layout: Layout, theta: Array, cells: Cells, root: Array, E: Array) -> Array:
        """d log Z / d theta (S, H - 1 - scale) for inside errors, process sd and lengths.

        E (S, U, U) is the whitened posterior second moment less the identity, so that
        d log Z / d K = L^-T E L^-1 / 2 at the fixed point of the sites.
        """
        Linv = np.linalg.inv(root)
        G = 0.5 * np.swapaxes(Linv, 1, 2) @ E @ Linv
        own = layout.family(theta)
        lengths = own[:, 1:][:, list(self.columns.factor)]
        r2 = squared_distance(cells.X, cells.X, lengths)
        process = own[:, 0, None, None] ** 2
        parts = []
        for j, sd in enumerate(layout.inside_sd(theta).T):
            groups = cells.inside[:, j]
            parts.append(2.0 * sd**2 * (G * same_group(groups, groups)).sum((1, 2)))
        parts.append(2.0 * (G * process * matern52(r2)).sum((1, 2)))
        sloped = G * process * matern52_slope(r2)
        for i in range(self.columns.factors):
            mine = [c for c, factor in enumerate(self.columns.factor) if factor == i]
            d2 = ((cells.X[:, None, mine] - cells.X[None, :, mine]) ** 2).sum(-1)
            parts.append((sloped * d2).sum((1, 2)) / own[:, 1 + i] ** 2)
        return np.stack(parts, axis=1)

    def weights(self, root: Array, mean: Array, V: Array) -> tuple[Array, Array]:
        """alpha (S, U) and Q (S, U, U): f(x) has mean k'alpha and covariance k(x,x') - k'Q k'."""
        Linv = np.linalg.inv(root)
        LinvT = np.swapaxes(Linv, 1, 2)
        shrunk = np.eye(V.shape[-1]) - V
        return (LinvT @ mean[..., None])[..., 0], LinvT @ shrunk @ Linv
