"""The law of a group of cells, such as a plate, given all others, at fixed hyperparameters.

The sites of the group are divided out of the Gaussian, which leaves the law of its latent values
and shared errors given the rest.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.approximation import Approximation
from muntin.surrogate.sites import Rows, Sites, natural
from muntin.surrogate.tilted import Pair

Array = NDArray[np.float64]
Index = NDArray[np.intp]


@dataclass(frozen=True)
class Ahead:
    """Law at S nodes of the latent values and shared errors of a group given the rest.

    cells (m,): its cells. latent (m,): place of each cell's latent value among the first L of the
    mean (S, L + G) and covariance (S, L + G, L + G); loads (S, m, G): how each cell's summed scale
    error is made of the last G. log_density (S,): log p(y_group | rest, theta). proper (S,):
    whether the law is one.
    """

    cells: Index
    latent: Index
    mean: Array
    covariance: Array
    loads: Array
    log_density: Array
    proper: NDArray[np.bool_]

    def nodes(self, index: Index) -> Ahead:
        """The law at some nodes, without what weighs them."""
        return replace(
            self,
            mean=self.mean[index],
            covariance=self.covariance[index],
            loads=self.loads[index],
        )

    @property
    def latents(self) -> int:
        """Number L of latent values."""
        return self.mean.shape[1] - self.loads.shape[2]

    def pairs(self) -> Pair:
        """Means and covariances (S, m) of the cells' pairs."""
        L, C, loads, at = self.latents, self.covariance, self.loads, self.latent
        uu = np.diagonal(C, axis1=1, axis2=2)[:, at]
        return Pair(
            self.mean[:, at],
            (loads @ self.mean[:, L:, None])[..., 0],
            np.maximum(uu, 1e-12),
            (C[:, at, L:] * loads).sum(-1),
            ((loads @ C[:, L:, L:]) * loads).sum(-1),
        )


def predict_ahead(rows: Rows, approx: Approximation, nodes: Index, cells: Index) -> Ahead:
    """The law of a group's latent values and scale errors without the group's sites.

    rows: of the `nodes` (S,) of the approximation.
    With the posterior N(mu, S) of x and the sites exp(t'x - x'Tx/2) of the group, the law without
    them has the covariance (I - S T)^-1 S and the mean (I - S T)^-1 (mu - S t).
    """
    latents, latent = np.unique(rows.latent[cells], return_inverse=True)
    loads, own = rows.scale[:, cells], rows.root.shape[2]
    root = rows.root[:, latents]
    w = approx.mean[nodes]
    mu = np.concatenate([(root @ w[:, :own, None])[..., 0], w[:, own:]], axis=1)
    S = _joint(root, approx.V[nodes], own)
    sites = {k: v[np.ix_(nodes, cells)] for k, v in vars(approx.sites).items()}
    T, t = _group_sites(loads, latent, len(latents), Sites(**sites))
    left = np.eye(S.shape[-1]) - S @ T
    solved = np.linalg.solve(
        left, np.concatenate([S, (mu - (S @ t[..., None])[..., 0])[..., None]], 2)
    )
    C, mean = 0.5 * (solved[..., :-1] + np.swapaxes(solved[..., :-1], 1, 2)), solved[..., -1]
    sign, log_det = np.linalg.slogdet(left)
    bent = t - (T @ mu[..., None])[..., 0]
    log_integral = 0.5 * ((mean * bent).sum(1) + (mu * t).sum(1) + log_det)
    log_density = log_integral + _site_constants(approx, nodes, cells).sum(1)
    prior = (root**2).sum(2)
    wide = np.diagonal(C, axis1=1, axis2=2)[:, : len(latents)] > 1.001 * prior + 1e-9
    proper = (sign > 0) & ~wide.any(1) & np.isfinite(log_density) & _definite(C)
    return Ahead(cells, latent, mean, C, loads, log_density, proper)


def _definite(C: Array) -> NDArray[np.bool_]:
    """Whether (S,) the covariances (S, R, R) are such, but for rounding."""
    index = np.arange(C.shape[-1])
    shored = C.copy()
    shored[:, index, index] += 1e-9
    try:
        np.linalg.cholesky(shored)
    except np.linalg.LinAlgError:
        return np.asarray(np.linalg.eigvalsh(shored)[:, 0] > 0.0)
    return np.ones(len(C), dtype=bool)


def _joint(root: Array, V: Array, own: int) -> Array:
    """Covariance (S, L + G, L + G) of latent values, root (S, L, R), and the scale errors."""
    latents, groups = root.shape[1], V.shape[-1] - own
    S = np.empty((len(V), latents + groups, latents + groups))
    S[:, :latents, :latents] = root @ V[:, :own, :own] @ np.swapaxes(root, 1, 2)
    S[:, :latents, latents:] = root @ V[:, :own, own:]
    S[:, latents:, :latents] = np.swapaxes(S[:, :latents, latents:], 1, 2)
    S[:, latents:, latents:] = V[:, own:, own:]
    return S


def _group_sites(loads: Array, latent: Index, latents: int, sites: Sites) -> tuple[Array, Array]:
    """Precision (S, L + G, L + G) and shift (S, L + G) of the product of the group's sites."""
    picks = np.eye(latents)[latent]
    size = latents + loads.shape[2]
    T, t = np.zeros((len(loads), size, size)), np.zeros((len(loads), size))
    place = np.arange(latents)
    T[:, place, place] = sites.uu @ picks
    T[:, :latents, latents:] = picks.T @ (sites.us[..., None] * loads)
    T[:, latents:, :latents] = np.swapaxes(T[:, :latents, latents:], 1, 2)
    T[:, latents:, latents:] = np.swapaxes(loads, 1, 2) @ (sites.ss[..., None] * loads)
    t[:, :latents] = sites.u @ picks
    t[:, latents:] = (loads * sites.s[..., None]).sum(1)
    return T, t


def _site_constants(approx: Approximation, nodes: Index, cells: Index) -> Array:
    """Log normaliser (S, m) by which a site falls short of the likelihood of its cell.

    The likelihood averaged over the cavity, less the bare site averaged over it.
    """
    at = np.ix_(nodes, cells)
    cavity = Pair(**{k: v[at] for k, v in vars(approx.cavity).items()})
    sites = Sites(**{k: v[at] for k, v in vars(approx.sites).items()})
    outer = natural(cavity)
    uu, us, ss = outer.uu + sites.uu, outer.us + sites.us, outer.ss + sites.ss
    u, s = outer.u + sites.u, outer.s + sites.s
    det = uu * ss - us**2
    form = (ss * u**2 - 2.0 * us * u * s + uu * s**2) / det
    form_cavity = outer.u * cavity.u + outer.s * cavity.s
    det_cavity = outer.uu * outer.ss - outer.us**2
    log_bare = 0.5 * (np.log(det_cavity) - np.log(det) + form - form_cavity)
    return approx.tilted.log_z[at] - log_bare
