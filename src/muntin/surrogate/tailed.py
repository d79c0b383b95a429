"""The law that draws about a node come from: a multivariate t, mixed with one that has a long tail
along the skew.

A posterior that is cut off on one side by a plateau reaches far to the other, along one direction
that its cells share. Along that direction the second part of the mixture is a two-piece t (Geweke
1989, Econometrica 57:1317, section 4) of few degrees of freedom.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_DEGREES, _LONG_DEGREES = 12.0, 3.0
# Share of the second part, and its scale on the long side, in sds of the node.
_SHARE, _LONG = 0.15, 3.0


@dataclass(frozen=True)
class Tailed:
    """The law of standardised variables z (R,) at S nodes; axis (S, R): unit vectors that point to
    the long side.
    """

    axis: Array

    def draw(self, points: Array, node: Index) -> Array:
        """Points (N, R + 2) of the unit cube to draws (N, R); node (N,): of each."""
        from scipy.special import chdtri, ndtri, stdtrit

        inside = np.clip(points, 1e-9, 1.0 - 1e-9)
        z = ndtri(inside[:, 2:]) * np.sqrt(_DEGREES / chdtri(_DEGREES, inside[:, :1]))
        second = np.flatnonzero(inside[:, 1] < _SHARE)
        axis, u = self.axis[node[second]], inside[second, 1] / _SHARE
        # A point of the unit interval says side and place of the two-piece law.
        short = 1.0 / (1.0 + _LONG)
        below, above = u / (2.0 * short), 0.5 + (u - short) / (2.0 * (1.0 - short))
        place = stdtrit(_LONG_DEGREES, np.where(u < short, below, above))
        along = np.where(u < short, place, _LONG * place)
        z[second] += (along - (z[second] * axis).sum(1))[:, None] * axis
        return z

    def log_density(self, z: Array, node: Index) -> Array:
        """Log density (N,) at draws (N, R)."""
        size, along = z.shape[1], (z * self.axis[node]).sum(1)
        square = (z**2).sum(1)
        across = np.maximum(square - along**2, 0.0)
        first = _log_t(square, size, _DEGREES)
        scale = np.where(along > 0.0, _LONG, 1.0)
        piece = _log_t((along / scale) ** 2, 1, _LONG_DEGREES) + np.log(2.0 / (1.0 + _LONG))
        second = _log_t(across, size - 1, _DEGREES) + piece
        return np.logaddexp(np.log1p(-_SHARE) + first, np.log(_SHARE) + second)


def _log_t(square: Array, size: int, degrees: float) -> Array:
    """Log density of a standard multivariate t at squared distances."""
    from scipy.special import gammaln

    norm = gammaln((degrees + size) / 2.0) - gammaln(degrees / 2.0)
    norm -= size / 2.0 * np.log(degrees * np.pi)
    return np.asarray(norm - 0.5 * (degrees + size) * np.log1p(square / degrees))
