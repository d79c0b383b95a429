"""Skewness that the cells give to the latent surface, beyond the Gaussian approximation.

At the fixed point every cell's own law, cavity times likelihood, agrees with the Gaussian in mean
and variance but not in its third cumulant. To first order the third cumulant of the surface is the
sum of what the cells pass on (Opper, Paquet & Winther 2013, J. Mach. Learn. Res. 14:2857,
section 3; Cseke & Heskes 2011, J. Mach. Learn. Res. 12:417):

    kappa_3(f(x)) = sum_c sum_ijk tau_c,ijk b_c,i b_c,j b_c,k,   b_c = cov(p_c)^-1 cov(p_c, f(x)),

p_c the pair of latent value and scale error of cell c and tau_c the third central moments of its
own law.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.approximation import Approximation
from muntin.surrogate.sites import Rows

Array = NDArray[np.float64]
# Powers that find the axis of the skew.
_STEPS = 8
# Cells whose standardised third moments stay below this at all nodes pass on nothing to speak of.
_LEAST = 0.05


@dataclass(frozen=True)
class Skew:
    """What K cells pass on at S nodes.

    u and s (S, W, K): loadings b of the latent value and of the scale error of each cell, for a
    covariance of f with the W whitened variables of the family; third (S, K, 4): moments uuu, uus,
    uss and sss.
    """

    u: Array
    s: Array
    third: Array

    def take(self, index: NDArray[np.intp]) -> Skew:
        """The skew of some nodes."""
        return Skew(self.u[index], self.s[index], self.third[index])

    def under(self, turn: Array) -> Skew:
        """The skew for loadings l with l turn (S, W', W) on the whitened variables."""
        return Skew(turn @ self.u, turn @ self.s, self.third)

    def cumulant(self, loading: Array) -> Array:
        """Third cumulant (S, n) of surfaces with loadings (S, n, W) on the whitened variables."""
        out = np.empty(loading.shape[:2])
        # Node by node the products stay small enough for the processor's cache.
        for node, row in enumerate(loading):
            u, s = row @ self.u[node], row @ self.s[node]
            uuu, uus, uss, sss = self.third[node].T
            u2, s2 = u * u, s * s
            out[node] = (u2 * u) @ uuu + 3.0 * ((u2 * s) @ uus + (u * s2) @ uss) + (s2 * s) @ sss
        return out


def skew_of(rows: Rows, approx: Approximation) -> Skew:
    """The skew at the nodes of an approximation; rows map w to the pairs of the cells."""
    post, third = approx.tilted.pair, approx.tilted.third
    sd_u, sd_s = np.sqrt(post.uu), np.sqrt(post.ss)
    size = np.abs(third) / np.stack([sd_u**3, sd_u**2 * sd_s, sd_u * sd_s**2, sd_s**3], axis=-1)
    chosen = np.flatnonzero(size.max(axis=(0, 2), initial=0.0) > _LEAST)
    own = rows.root.shape[2]
    det = (post.uu * post.ss - post.us**2)[:, None, chosen]
    uu, us, ss = (v[:, None, chosen] for v in (post.uu, post.us, post.ss))
    # Covariances of the family's whitened variables with the pairs.
    by_u = approx.V[:, :own, :own] @ np.swapaxes(rows.root[:, rows.latent[chosen]], 1, 2)
    by_s = np.zeros_like(by_u)
    if rows.scale.shape[2]:
        by_s = approx.V[:, :own, own:] @ np.swapaxes(rows.scale[:, chosen], 1, 2)
    return Skew((ss * by_u - us * by_s) / det, (uu * by_s - us * by_u) / det, third[:, chosen])


def skew_axis(rows: Rows, approx: Approximation, root: Array) -> Array:
    """Unit vectors (S, R) along which the third cumulant that latent values pass on is largest.

    root (S, R, R): of the covariance of w, in whose coordinates they are. Powers of the cumulant as
    a tensor find it, from the cell that is skewed most (De Lathauwer, De Moor & Vandewalle 2000,
    SIAM J. Matrix Anal. Appl. 21:1324, from memory); where nothing is skewed, it is any.
    """
    own = rows.root.shape[2]
    loading = rows.root[:, rows.latent] @ root[:, :own]
    variance, third = (loading**2).sum(-1), approx.tilted.third[..., 0]
    most = np.argmax(np.abs(third) / variance**1.5, axis=1)
    each = np.arange(len(most))
    axis = loading[each, most] / np.sqrt(variance[each, most])[:, None]
    for _ in range(_STEPS):
        along = np.einsum("scr,sr->sc", loading, axis)
        turned = np.einsum("sc,scr->sr", third * along**2 / variance**3, loading)
        length = np.sqrt((turned**2).sum(1, keepdims=True))
        axis = np.where(length > 1e-12, turned / np.maximum(length, 1e-300), axis)
    cumulant = (third * (np.einsum("scr,sr->sc", loading, axis) / variance) ** 3).sum(1)
    return axis * np.where(cumulant < 0.0, -1.0, 1.0)[:, None]
