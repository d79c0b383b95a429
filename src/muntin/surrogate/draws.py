"""Draws of the posterior by a sampler, and what they say of the readings and of new wells."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.assembly import nodes_of
from muntin.surrogate.evidence import Model
from muntin.surrogate.links import Link, mean_of, slope_of
from muntin.surrogate.nodes import Surface

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Numbers that the roots of some draws, or the matrices of all nodes, may hold at a time.
_CHUNK, _HELD = 10_000_000, 50_000_000


@dataclass(frozen=True)
class Law:
    """Law of n readings at S draws: centre and sd (S, n); with Student-t noise the degrees of
    freedom (S, 1), and sd is then its scale.
    """

    centre: Array
    sd: Array
    degrees: Array | None = None

    def log_density(self, y: Array, censored: Index) -> Array:
        """Log density (S, n) of y (n,); where censored (n,), log probability of that event."""
        from scipy.special import log_ndtr
        from scipy.stats import t

        z = (y - self.centre) / self.sd
        toward = np.where(censored < 0, z, -z)
        if self.degrees is None:
            read = -0.5 * (z**2 + np.log(2.0 * np.pi)) - np.log(self.sd)
            beyond = log_ndtr(toward)
        else:
            read = np.asarray(t.logpdf(z, self.degrees) - np.log(self.sd))
            beyond = np.asarray(t.logcdf(toward, self.degrees))
        return np.where(censored == 0, read, beyond)

    def below(self, y: Array) -> Array:
        """Probability (S, n) that a reading lies below y (n,)."""
        from scipy.special import ndtr
        from scipy.stats import t

        z = (y - self.centre) / self.sd
        return np.asarray(ndtr(z) if self.degrees is None else t.cdf(z, self.degrees))

    @property
    def width(self) -> Array:
        """Half the width (S, n) of the central 68.3 % of a reading: the sd where it is normal."""
        from scipy.stats import t

        return self.sd if self.degrees is None else self.sd * t.isf(0.158655254, self.degrees)


@dataclass(frozen=True, kw_only=True, eq=False)
class Draws:
    """N draws of each of K chains from the posterior of a model.

    eta (K, N, H): standardised hyperparameters; w (K, N, R): whitened latents; z (K, N, G):
    standardised scale errors, all groups in order; nu (K, N): degrees of freedom of Student-t
    noise. stats: what the sampler says of each draw (K, N), by name. sampler: its name.
    """

    model: Model
    eta: Array
    w: Array
    z: Array
    nu: Array | None
    stats: Mapping[str, NDArray[Any]]
    sampler: str

    def __len__(self) -> int:
        """Number S = K N of draws."""
        return self.eta.shape[0] * self.eta.shape[1]

    @cached_property
    def theta(self) -> Array:
        """Log hyperparameters (S, H), chain after chain."""
        return self.model.layout.theta(_flat(self.eta))

    @cached_property
    def latents(self) -> Array:
        """Latent values (S, U), prior mean included."""
        cells, family = self.model.cells, self.model.family
        w, out = _flat(self.w), np.empty((len(self), len(cells.X)))
        size = max(1, _CHUNK // max(1, len(cells.X) * w.shape[1]))
        for start in range(0, len(self), size):
            some = slice(start, start + size)
            root = family.root(self.model.layout, self.theta[some], cells)
            out[some] = (root @ w[some, :, None])[..., 0]
        return out + family.priors.mean

    @cached_property
    def law(self) -> Law:
        """Law of every reading given each draw's latents and scale errors."""
        model, cells, theta = self.model, self.model.cells, self.theta
        z, sds, start = _flat(self.z), model.layout.scale_sd(theta), 0
        shift = np.zeros((len(self), len(cells)))
        for j, groups in enumerate(cells.scale_groups):
            shift = shift + sds[:, j : j + 1] * z[:, start + cells.scale[j]]
            start += groups
        u, ceiling = self.latents[:, cells.latent], model.layout.ceiling_of(theta)[:, None]
        centre = (1.0 + shift) * mean_of(model.link, u, ceiling)
        wandering = slope_of(model.link, u, ceiling) ** 2 * model.wander
        variance = model.layout.noise(theta)[:, None] ** 2 + cells.variance + wandering
        degrees = None if self.nu is None else _flat(self.nu[..., None])
        return Law(centre[:, cells.cell], np.sqrt(variance)[:, cells.cell], degrees)

    @cached_property
    def log_likelihood(self) -> Array:
        """Log density (S, n) of every reading, or log probability of a censored one."""
        cells = self.model.cells
        return self.law.log_density(cells.y, cells.censored[cells.cell])

    def surface(self, link: Link, nodes: int, seed: int) -> Surface:
        """At most so many draws, evenly thinned, as nodes whose latent values are known.

        With Student-t noise each node has its own noise sd, drawn as its scale mixture of normals
        says (West 1987), so that all of them together make t noise for a well to come.
        """
        family, layout, cells = self.model.family, self.model.layout, self.model.cells
        w = _flat(self.w)
        most = min(nodes, len(self), max(1, _HELD // w.shape[1] ** 2))
        index = np.linspace(0, len(self) - 1, most).round().astype(np.intp)
        theta = self.theta[index]
        root = family.root(layout, theta, cells)
        width = w.shape[1]
        known = np.broadcast_to(np.zeros((width, width)), (most, width, width))
        if self.nu is not None:
            nu = _flat(self.nu[..., None])[index, 0]
            mixing = np.random.default_rng(seed).gamma(nu / 2.0, 2.0 / nu)
            theta = theta.copy()
            theta[:, 0] -= 0.5 * np.log(mixing)
        part = nodes_of(self.model, theta, root, w[index], known)
        return Surface((part,), np.full(most, 1.0 / most), link)


def _flat(values: Array) -> Array:
    """Values (K, N, ...) as (K N, ...)."""
    return values.reshape(values.shape[0] * values.shape[1], *values.shape[2:])
