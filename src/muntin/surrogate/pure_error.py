"""Lack of fit against pure error: the spread of repeats beside the noise that the rest asks for.

The likelihood of the readings is that of the cell means times that of the spread about them. The
posterior without the second factor says how much noise the surface needs to pass the means; under
the model the sum of squares of the repeats over that variance is chi-square. For least squares with
a flat prior on ln(noise) its lower tail, averaged over the posterior, is the tail of the F test of
lack of fit (Montgomery, Design and Analysis of Experiments, section 11.2, cited from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.evidence import Model
from muntin.surrogate.hyperparameters import Posterior
from muntin.surrogate.weights import tempered

Array = NDArray[np.float64]
# Levels of the prior, in its sds, at which the tail of repeats is averaged over it.
_LEVELS = np.linspace(-5.0, 5.0, 201)


@dataclass(frozen=True)
class PureError:
    """degrees: of freedom of the repeats. sd: of a reading by them. needed: the sd that the other
    readings ask for. tail: probability of repeats that agree as well or better.
    """

    degrees: int
    sd: float
    needed: float
    tail: float


def pure_error(model: Model, posterior: Posterior) -> PureError:
    """Repeats within the cells of a fit against the noise that its cell means need."""
    from scipy.special import gammainc

    cells, evidence = model.cells, posterior.evidence
    repeated = np.flatnonzero(cells.count > 1.0)
    degrees = int((cells.count[repeated] - 1.0).sum())
    if not degrees:
        return PureError(0, np.nan, np.nan, 0.5)
    lik = model.likelihood(evidence.theta)
    mean = evidence.approximation.mean[:, : evidence.root.shape[2]]
    u = (evidence.root @ mean[..., None])[..., 0][:, cells.latent]
    variance = np.broadcast_to(lik.reading_variance(u), u.shape)[:, repeated]
    extra, within = cells.count[repeated] - 1.0, cells.within[repeated]
    square = (within / variance).sum(1)
    log_density = -0.5 * (square + (extra * np.log(variance)).sum(1))
    w = np.exp(tempered(posterior.log_weights, -log_density)[0])
    needed = np.exp(w @ np.log((extra * variance).sum(1) / degrees) / 2.0)
    tail = float(w @ gammainc(degrees / 2.0, square / 2.0))
    return PureError(degrees, float(np.sqrt(within.sum() / degrees)), float(needed), tail)


def agreement(model: Model) -> float:
    """Probability that repeats agree as well or better under the prior of the noise alone, with the
    uncertainties that the readings state; 1 without repeats.
    """
    from scipy.special import gammainc

    cells, prior = model.cells, model.family.priors.noise_sd
    repeated = np.flatnonzero(cells.count > 1.0)
    degrees = (cells.count[repeated] - 1.0).sum()
    noise = prior.median * np.exp(prior.log_sd * _LEVELS)
    variance = noise[:, None] ** 2 + cells.variance[repeated]
    square = (cells.within[repeated] / variance).sum(1)
    weights = np.exp(-0.5 * _LEVELS**2)
    if not degrees:
        return 1.0
    tail = gammainc(degrees / 2.0, square / 2.0)
    return float(weights @ tail / weights.sum())
