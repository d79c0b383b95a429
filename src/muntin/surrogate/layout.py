"""Hyperparameters of one surrogate: their order, priors and standardised coordinates."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.priors import LogNormal

Array = NDArray[np.float64]
# A ceiling never lies lower than this below 1.
MOST_GAP = 0.5


@dataclass(frozen=True, kw_only=True)
class Layout:
    """Order of the log hyperparameters theta (S, H): noise, inside errors, scale errors, the gap of
    the ceiling (a fraction's), family.

    names: one a hyperparameter; priors: the log-normal prior of each.
    """

    inside: int
    scale: int
    ceiling: int
    names: tuple[str, ...]
    priors: tuple[LogNormal, ...]

    def __len__(self) -> int:
        return len(self.names)

    @property
    def log_median(self) -> Array:
        """Prior mean (H,) of theta."""
        return np.log([p.median for p in self.priors])

    @property
    def log_sd(self) -> Array:
        """Prior sd (H,) of theta."""
        return np.array([p.log_sd for p in self.priors])

    def theta(self, eta: Array) -> Array:
        """Log hyperparameters (S, H) of standardised coordinates eta (S, H) ~ N(0, I)."""
        return self.log_median + self.log_sd * eta

    def noise(self, theta: Array) -> Array:
        """Sd (S,) of a reading."""
        return np.exp(theta[:, 0])

    def inside_sd(self, theta: Array) -> Array:
        """Sd (S, inside) of each inside error."""
        return np.exp(theta[:, 1 : 1 + self.inside])

    def scale_sd(self, theta: Array) -> Array:
        """Sd (S, scale) of each scale error."""
        return np.exp(theta[:, 1 + self.inside : 1 + self.inside + self.scale])

    def ceiling_of(self, theta: Array) -> Array:
        """The ceiling (S,): 1 less the gap, which stays below a half; 1 where there is no gap."""
        place = 1 + self.inside + self.scale
        if not self.ceiling:
            return np.ones(len(theta))
        return 1.0 - np.minimum(np.exp(theta[:, place]), MOST_GAP)

    def family(self, theta: Array) -> Array:
        """The family's own hyperparameters (S, rest), as positive values."""
        return np.exp(theta[:, 1 + self.inside + self.scale + self.ceiling :])
