"""Gaussian sites of the cells, and the Gaussian law of the whitened variables under them."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.tilted import Pair

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Rows:
    """Linear maps from w to the pairs of C cells, in the factors that they share.

    root (S, U, R0): latent values from the first whitened variables; latent (C,): the latent
    value of a cell; scale (S, C, G): standardised scale errors from the last G variables, with
    G = 0 where there are none.
    """

    root: Array
    latent: NDArray[np.intp]
    scale: Array

    def nodes(self, index: NDArray[np.intp]) -> Rows:
        """The maps of some nodes."""
        if len(index) == len(self.root):
            return self
        return Rows(self.root[index], self.latent, self.scale[index])

    @cached_property
    def _apart(self) -> bool:
        """Whether every cell has a latent value of its own, in order."""
        return np.array_equal(self.latent, np.arange(self.root.shape[1]))

    def spread(self, latents: Array) -> Array:
        """The value (S, C, ...) of each cell's latent value, of quantities (S, U, ...)."""
        return latents if self._apart else latents[:, self.latent]

    def gathered(self, cells: Array) -> Array:
        """Sums (S, U, ...) over the cells of each latent value of quantities (S, C, ...)."""
        if self._apart:
            return cells
        incidence = np.zeros((self.root.shape[1], len(self.latent)))
        incidence[self.latent, np.arange(len(self.latent))] = 1.0
        return np.tensordot(cells, incidence, axes=(1, 1)) if cells.ndim == 2 else incidence @ cells


@dataclass(frozen=True)
class Sites:
    """Natural parameters (S, C) of the sites: shifts u, s and precisions uu, us, ss."""

    u: Array
    s: Array
    uu: Array
    us: Array
    ss: Array

    def toward(self, other: Sites, step: Array | float) -> Sites:
        """These sites moved the fraction `step` towards the others, given alike in all fields."""
        here, there = vars(self), vars(other)
        return Sites(**{k: here[k] + step * (there[k] - here[k]) for k in here})

    def times(self, factor: Array) -> Sites:
        """The sites raised to the power `factor`, (S, 1) or (S, C)."""
        return Sites(**{k: factor * v for k, v in vars(self).items()})

    def where_finite(self, other: Sites) -> Sites:
        """The sites, with the others' in every cell where a number is not finite."""
        good = np.isfinite(np.stack(list(vars(self).values()))).all(axis=0)
        return Sites(**{k: np.where(good, v, vars(other)[k]) for k, v in vars(self).items()})

    def proper(self) -> Sites:
        """The nearest sites without a negative precision: negative eigenvalues set to 0."""
        middle, half = 0.5 * (self.uu + self.ss), 0.5 * (self.uu - self.ss)
        spread = np.hypot(half, self.us)
        high, low = middle + spread, middle - spread
        scale = np.maximum(high, 0.0) / np.maximum(2.0 * spread, 1e-300)
        bad = low < 0.0
        uu = np.where(bad, scale * (self.uu - low), self.uu)
        ss = np.where(bad, scale * (self.ss - low), self.ss)
        return Sites(self.u, self.s, uu, np.where(bad, scale * self.us, self.us), ss)

    def less(self, other: Sites) -> Sites:
        """The sites divided by others."""
        here, there = vars(self), vars(other)
        return Sites(**{k: here[k] - there[k] for k in here})

    def nodes(self, index: NDArray[np.intp]) -> Sites:
        """The sites of some nodes, repeats allowed."""
        return Sites(**{k: v[index] for k, v in vars(self).items()})

    def replaced(self, index: NDArray[np.intp], new: Sites) -> Sites:
        """The sites with those of some nodes replaced."""
        out = {k: v.copy() for k, v in vars(self).items()}
        for k, v in vars(new).items():
            out[k][index] = v
        return Sites(**out)


class Gaussian:
    """N(0, I) in w times the sites, made positive definite where the sites are not."""

    def __init__(self, rows: Rows, sites: Sites) -> None:
        self.rows, self.sites = rows, sites
        self.V, self.log_det, bad = invert(self._precision())
        if len(bad):
            self.sites = sites.replaced(bad, sites.nodes(bad).proper())
            self.V, self.log_det, bad = invert(self._precision())
        if len(bad):
            raise np.linalg.LinAlgError("precision not positive definite with proper sites")
        self.mean = (self.V @ self.shift[..., None])[..., 0]
        self.pair = self._pair()

    def _precision(self) -> Array:
        """I plus the sites, in w, by blocks; sets the shift."""
        root, scale, t = self.rows.root, self.rows.scale, self.sites
        turned = np.swapaxes(root, 1, 2)
        gathered = self.rows.gathered
        own = root.shape[2]
        M = np.empty((len(root), own + scale.shape[2], own + scale.shape[2]))
        M[:, :own, :own] = turned @ (gathered(t.uu)[..., None] * root)
        M[:, :own, own:] = turned @ gathered(t.us[..., None] * scale)
        M[:, own:, :own] = np.swapaxes(M[:, :own, own:], 1, 2)
        M[:, own:, own:] = np.swapaxes(scale, 1, 2) @ (t.ss[..., None] * scale)
        index = np.arange(M.shape[-1])
        M[:, index, index] += 1.0
        shift_u = (turned @ gathered(t.u)[..., None])[..., 0]
        shift_s = np.einsum("scg,sc->sg", scale, t.s)
        self.shift = np.concatenate([shift_u, shift_s], axis=1)
        return M

    def _pair(self) -> Pair:
        root, scale, spread = self.rows.root, self.rows.scale, self.rows.spread
        own = root.shape[2]
        mean_u = spread((root @ self.mean[:, :own, None])[..., 0])
        uu = spread(np.einsum("sur,sur->su", root @ self.V[:, :own, :own], root))
        if not scale.shape[2]:
            zero = np.zeros_like(uu)
            return Pair(mean_u, zero, uu, zero, np.ones_like(uu))
        mean_s = (scale @ self.mean[:, own:, None])[..., 0]
        us = (spread(root @ self.V[:, :own, own:]) * scale).sum(-1)
        ss = ((scale @ self.V[:, own:, own:]) * scale).sum(-1)
        return Pair(mean_u, mean_s, uu, us, ss)

    def log_integral(self) -> Array:
        """ln of the integral (S,) of N(w; 0, I) times the unnormalised sites."""
        return 0.5 * (self.shift * self.mean).sum(1) - 0.5 * self.log_det


def invert(M: Array) -> tuple[Array, Array, NDArray[np.intp]]:
    """Inverses of symmetric matrices M (S, R, R), in their place; log determinants (S,); numbers
    of those that are not positive definite, whose answers mean nothing. What is NaN stays so.
    """
    from scipy.linalg.lapack import dpotrf, dpotri

    # Two calls of LAPACK a matrix take half the time of a factor and a general inverse.
    turned = np.swapaxes(M, 1, 2)
    failed = [dpotrf(A, lower=0, clean=1, overwrite_a=1)[1] for A in turned]
    bad = np.flatnonzero(failed)
    M[bad] = np.eye(M.shape[1])
    log_det = 2.0 * np.log(np.diagonal(M, axis1=1, axis2=2)).sum(1)
    for A in turned:
        dpotri(A, lower=0, overwrite_c=1)
    # One triangle holds the inverse, the other zeros.
    index = np.arange(M.shape[1])
    M[:, index, index] *= 0.5
    return M + turned, log_det, bad


def natural(p: Pair) -> Sites:
    """Natural parameters of N(mean, covariance) of the pairs."""
    det = p.uu * p.ss - p.us**2
    uu, us, ss = p.ss / det, -p.us / det, p.uu / det
    return Sites(uu * p.u + us * p.s, us * p.u + ss * p.s, uu, us, ss)
