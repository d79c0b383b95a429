"""One response at conditions: what the nodes say, and the cloud where that is not nearly sure."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.nodes import Surface
from muntin.window.density import reading_density
from muntin.window.probability import Moments, Target, mean_meets, well_meets

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Where the nodes are as sure as this the cloud has nothing to add.
_SURE = 5e-4
_CHUNK = 600_000
# A reading's noise smooths its law, so that fewer draws tell it.
_ENOUGH = 8192


@dataclass(frozen=True)
class Predicted:
    """One response at n conditions: surface, latent law (S, n), target, and where factors are set
    with errors the latent variance (S, n) that they make and the latent shift (n, D) by one sd of
    each; coded X (n, D), without which no cloud is asked.
    """

    surface: Surface
    moments: Moments
    target: Target
    wander: Array | None = None
    shift: Array | None = None
    X: Array | None = None

    @classmethod
    def of(cls, surface: Surface, X: Array, target: Target, setting: Array) -> Predicted:
        """The response at coded X (n, D), set with sds `setting` (n, D) in coded units."""
        moments = surface.latent(X)
        if not setting.any():
            return cls(surface, moments, target, X=X)
        slopes = surface.slopes(X)
        wander = ((slopes * setting) ** 2).sum(-1)
        shift = np.tensordot(surface.weights, slopes, axes=1) * setting
        return cls(surface, moments, target, wander, shift, X)

    def process_met(self, target: Target | None = None) -> Array:
        """Chance (n,) that the process mean meets the target, or another."""
        asked = target or self.target
        p = mean_meets(self.surface, self.moments, asked)
        cloud = self.surface.cloud
        if cloud is None:
            return p
        return self._sharpened(p, cloud, lambda law, _: mean_meets(cloud, law, asked))

    def met(self, target: Target | None = None) -> Array:
        """Chance (n,) that a reading meets the target, or another."""
        asked = target or self.target
        wander = 0.0 if self.wander is None else self.wander
        p = well_meets(self.surface, self.moments, asked, wander)
        if self.surface.cloud is None:
            return p
        cloud = self.surface.cloud.lightened(_ENOUGH)
        return self._sharpened(p, cloud, lambda law, more: well_meets(cloud, law, asked, more))

    def at(self, rows: Index) -> Predicted:
        """The response at some of the conditions."""
        return replace(
            self,
            moments=tuple(part[:, rows] for part in self.moments),
            wander=None if self.wander is None else self.wander[:, rows],
            shift=None if self.shift is None else self.shift[rows],
            X=None if self.X is None else self.X[rows],
        )

    def density(self, limit: float) -> Array:
        """Density (S, n) of a reading at a limit at each node."""
        wander = 0.0 if self.wander is None else self.wander
        return reading_density(self.surface, self.moments, limit, wander)

    def _sharpened(
        self, p: Array, cloud: Surface, meets: Callable[[Moments, Array | float], Array]
    ) -> Array:
        """Chances (n,) of the nodes, and those of the cloud where the nodes are not sure."""
        if self.X is None:
            return p
        rows = np.flatnonzero((p > _SURE) & (p < 1.0 - _SURE))
        out, size = p.copy(), max(1, _CHUNK // len(cloud.weights))
        for start in range(0, len(rows), size):
            some = rows[start : start + size]
            # Draws differ little in what setting errors make of them.
            wander = 0.0 if self.wander is None else self.surface.weights @ self.wander[:, some]
            out[some] = meets(cloud.latent(self.X[some]), wander)
        return out
