"""The quadratic surrogate: a full second-order polynomial with independent normal priors."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.cells import Cells
from muntin.surrogate.coding import Columns
from muntin.surrogate.kernels import polynomial_basis, quadratic_terms
from muntin.surrogate.layout import Layout
from muntin.surrogate.priors import LogNormal, Priors

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Quadratic:
    """Prior of the latent surface: constant N(0, mean_sd^2), slopes and products process_sd,
    squares curvature_sd, over coded factors.
    """

    columns: Columns
    priors: Priors
    name: str = "quadratic"

    @cached_property
    def terms(self) -> list[tuple[int, ...]]:
        """Column indices of each coefficient: constant, linear, squares, products."""
        return quadratic_terms(self.columns)

    def own(self) -> tuple[tuple[str, LogNormal], ...]:
        """Names and priors of the family's hyperparameters."""
        return (
            ("process_sd", self.priors.process_sd),
            ("curvature_sd", self.priors.curvature_sd),
        )

    def basis(self, X: Array) -> Array:
        """Polynomial terms (n, p) at coded X (n, D)."""
        return polynomial_basis(X, self.terms)

    def _owner(self) -> NDArray[np.intp]:
        """Which sd each coefficient has: -1 the constant's, 0 process_sd, 1 curvature_sd."""
        kinds = [-1 if not t else int(len(t) == 2 and t[0] == t[1]) for t in self.terms]
        return np.array(kinds)

    def coefficient_sd(self, own: Array) -> Array:
        """Prior sd (S, p) of the coefficients; plain arithmetic, so that `own` may be symbolic."""
        owner = self._owner()
        return own[:, np.maximum(owner, 0)] * (owner >= 0) + self.priors.mean_sd * (owner < 0)

    def root(self, layout: Layout, theta: Array, cells: Cells) -> Array:
        """L (S, U, p + groups) with L L' the prior covariance of the latent values."""
        sd = self.coefficient_sd(layout.family(theta))
        parts = [self.basis(cells.X)[None] * sd[:, None, :]]
        for j, tau in enumerate(layout.inside_sd(theta).T):
            groups = int(cells.inside[:, j].max(initial=-1)) + 1
            parts.append(np.eye(groups)[cells.inside[:, j]][None] * tau[:, None, None])
        return np.concatenate(parts, axis=2)

    def gradient(self, layout: Layout, theta: Array, cells: Cells, root: Array, E: Array) -> Array:
        """d log Z / d theta (S, inside + 2); for a coefficient w of sd d, d log Z / d ln d = E."""
        del theta, root
        p = len(self.terms)
        diagonal = np.diagonal(E, axis1=1, axis2=2)
        parts, start = [], p
        for j in range(layout.inside):
            stop = start + int(cells.inside[:, j].max(initial=-1)) + 1
            parts.append(diagonal[:, start:stop].sum(1))
            start = stop
        owner = self._owner()
        parts += [diagonal[:, :p][:, owner == k].sum(1) for k in (0, 1)]
        return np.stack(parts, axis=1)

    def coefficients(self, own: Array, mean: Array, V: Array) -> tuple[Array, Array]:
        """Posterior mean (S, p) and covariance (S, p, p) of the coefficients."""
        p = len(self.terms)
        sd = self.coefficient_sd(own)
        return sd * mean[:, :p], sd[:, :, None] * V[:, :p, :p] * sd[:, None, :]
