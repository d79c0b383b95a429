"""What the approximation says at nodes: the Gaussian of the whitened variables, sites, cavities."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.sites import Sites
from muntin.surrogate.tilted import Pair, Tilted

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Approximation:
    """Posterior of w at S nodes: mean (S, R), covariance V (S, R, R); log evidence (S,); the
    sites, the cavity pair and the tilted answer of every cell; numbers of the nodes that have no
    proper fixed point (a noise far smaller than the shared errors) and are Laplace's instead.
    """

    mean: Array
    V: Array
    log_evidence: Array
    sites: Sites
    cavity: Pair
    tilted: Tilted
    laplace: NDArray[np.intp]

    def nodes(self, index: NDArray[np.intp]) -> Approximation:
        """Some of the nodes; which of them are Laplace's is not kept."""
        t = self.tilted
        return Approximation(
            self.mean[index],
            self.V[index],
            self.log_evidence[index],
            self.sites.nodes(index),
            _at(self.cavity, index),
            Tilted(
                _at(t.pair, index),
                t.third[index],
                t.log_z[index],
                t.noise_slope[index],
                t.ceiling_slope[index],
            ),
            np.zeros(0, dtype=np.intp),
        )

    @property
    def skewed(self) -> bool:
        """Whether any cell's own law is skewed."""
        return bool(self.tilted.third.any())


def join(parts: Sequence[Approximation]) -> Approximation:
    """The approximations of several groups of nodes as one."""
    if len(parts) == 1:
        return parts[0]
    starts = np.cumsum([0, *(len(p.mean) for p in parts[:-1])])
    tilted = [p.tilted for p in parts]
    return Approximation(
        np.concatenate([p.mean for p in parts]),
        np.concatenate([p.V for p in parts]),
        np.concatenate([p.log_evidence for p in parts]),
        Sites(**_fields([p.sites for p in parts])),
        Pair(**_fields([p.cavity for p in parts])),
        Tilted(
            Pair(**_fields([t.pair for t in tilted])),
            np.concatenate([t.third for t in tilted]),
            np.concatenate([t.log_z for t in tilted]),
            np.concatenate([t.noise_slope for t in tilted]),
            np.concatenate([t.ceiling_slope for t in tilted]),
        ),
        np.concatenate([p.laplace + start for p, start in zip(parts, starts, strict=True)]),
    )


def _at(pair: Pair, index: NDArray[np.intp]) -> Pair:
    return Pair(**{k: v[index] for k, v in vars(pair).items()})


def _fields(parts: Sequence[Sites] | Sequence[Pair]) -> dict[str, Array]:
    return {k: np.concatenate([vars(p)[k] for p in parts]) for k in vars(parts[0])}
