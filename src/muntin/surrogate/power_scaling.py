"""How much a posterior moves when its prior or its likelihood counts a little more or less.

Power-scaling (Kallioinen, Paananen, Buerkner & Vehtari 2024, Statistics and Computing 34:57): the
prior or the likelihood is raised to a power alpha by reweighting, and the move of each quantity is
measured by the cumulative Jensen-Shannon distance (Nguyen & Vreeken 2015). Its normalisation, the
threshold and the section numbers below are cited from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.hyperparameters import Posterior, log_prior
from muntin.surrogate.weights import normalised

Array = NDArray[np.float64]
ALPHAS = (0.8, 1.25)
# Above it a posterior is called sensitive (Kallioinen et al. 2024, section 3.3).
SENSITIVE = 0.05


@dataclass(frozen=True)
class Sensitivity:
    """Moves (H,) of each hyperparameter per doubling of its prior and of the likelihood, and its
    posterior mean (H,) in sds of its prior from the prior's median.
    """

    prior: Array
    likelihood: Array
    place: Array

    @property
    def conflict(self) -> NDArray[np.bool_]:
        """Whether (H,) prior and likelihood both move it, which pull in different directions."""
        return (self.prior >= SENSITIVE) & (self.likelihood >= SENSITIVE)


def sensitivity(posterior: Posterior) -> Sensitivity:
    """Sensitivity of each hyperparameter to its own prior and to the likelihood."""
    eta, base = posterior.eta, posterior.log_weights
    prior, likelihood = np.zeros(eta.shape[1]), np.zeros(eta.shape[1])
    w = np.exp(base)[:, None]
    for alpha in ALPHAS:
        per = 1.0 / (len(ALPHAS) * abs(np.log2(alpha)))
        own = base[:, None] - 0.5 * (alpha - 1.0) * eta**2
        own = np.exp(own - np.logaddexp.reduce(own, axis=0))
        prior += per * cumulative_distance(eta, w, own)
        likely = np.exp(normalised(base + (alpha - 1.0) * posterior.evidence.log))
        likelihood += per * cumulative_distance(eta, w, likely[:, None])
    return Sensitivity(prior, likelihood, np.exp(base) @ eta)


def prior_scaled(posterior: Posterior, alpha: float) -> Array:
    """Weights (S,) of the nodes under the prior raised to the power alpha."""
    return np.exp(normalised(posterior.log_weights + (alpha - 1.0) * log_prior(posterior.eta)))


def cumulative_distance(x: Array, w: Array, v: Array) -> Array:
    """Cumulative Jensen-Shannon distance (H,) between weights w and v (S, 1 or H) on x (S, H).

    0 where they agree, at most 1; the larger of the distances of x and of -x, so that it does not
    depend on the sign (Kallioinen et al. 2024, section 2.3).
    """
    order = np.argsort(x, axis=0)
    step = np.diff(np.take_along_axis(x, order, axis=0), axis=0)
    P, Q = (
        np.cumsum(np.take_along_axis(np.broadcast_to(a, x.shape), order, axis=0), axis=0)[:-1]
        for a in (w, v)
    )
    return np.maximum(_distance(step, P, Q), _distance(step, 1.0 - P, 1.0 - Q))


def _distance(step: Array, P: Array, Q: Array) -> Array:
    P, Q = np.clip(P, 0.0, 1.0), np.clip(Q, 0.0, 1.0)
    middle = np.maximum(0.5 * (P + Q), 1e-300)
    both = sum(R * np.log2(np.maximum(R, 1e-300) / middle) for R in (P, Q))
    total = (step * (P + Q)).sum(0)
    return np.sqrt(np.maximum((step * both).sum(0) / np.maximum(total, 1e-300), 0.0))
