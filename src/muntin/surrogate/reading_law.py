"""The readings of one response as one Gaussian law, linearised at the fit.

At the posterior mean of its hyperparameters a response reads y = (1 + e) g(u) + noise; the mean is
linearised in the latent values u and the scale errors e where the posterior has its mode
(Gauss-Newton), which is exact for the identity link. Then y ~ N(prior mean, J J' + noise), and
noise variance times the precision-weighted misfit is the fitted residual (Rasmussen & Williams
2006, section 5.4.2).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.cells import Readings
from muntin.surrogate.fit import Fit

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_STEPS = 6
_MOST_MOVE = 1.5


@dataclass(frozen=True)
class ReadingLaw:
    """Readings (n,) of one response, all on the scale on which noise is additive.

    misfit (n,): less their linearised prior mean. covariance (n, n): of the misfits. noise (n,):
    sd of the common noise. own (n,): sd of all that is the reading's own, with the uncertainty it
    states and its setting errors. moved (n, D): shift by one sd of the setting error of each coded
    column.
    """

    misfit: Array
    covariance: Array
    noise: Array
    own: Array
    moved: Array

    def __len__(self) -> int:
        return len(self.misfit)

    @property
    def residual(self) -> Array:
        """Fitted residuals (n,)."""
        return self.own**2 * np.linalg.solve(self.covariance, self.misfit)


def reading_law(fit: Fit, readings: Readings, rows: Index) -> ReadingLaw:
    """The law of some rows of the readings that the fit has seen, none of them censored."""
    model, cell = fit.model, fit.model.cells.cell[rows]
    theta = (fit.weights @ fit.theta)[None]
    maps, lik = model.rows(theta), model.likelihood(theta)
    latent, shared = maps.root[0][maps.latent[cell]], maps.scale[0][cell]
    noise, e = np.full(len(rows), lik.noise[0, 0]), float(lik.scale[0, 0])
    u = fit.surface.weights @ fit.surface.moments(readings.X[rows])[0] - lik.offset
    s = np.zeros(len(rows))
    for _ in range(_STEPS):
        g, slope = lik.process_mean(u[None])[0], lik.slope(u[None])[0]
        by_u, by_s = (1.0 + e * s) * slope, e * g
        J = np.hstack([by_u[:, None] * latent, by_s[:, None] * shared])
        own = noise + readings.sd[rows] ** 2 + slope**2 * model.wander[cell]
        covariance = J @ J.T + np.diag(own)
        misfit = readings.y[rows] - (1.0 + e * s) * g + by_u * u + by_s * s
        w = J.T @ np.linalg.solve(covariance, misfit)
        move = np.clip(latent @ w[: latent.shape[1]] - u, -_MOST_MOVE, _MOST_MOVE)
        if lik.link != "logit" or np.abs(move).max(initial=0.0) < 1e-3:
            break
        u, s = u + move, shared @ w[latent.shape[1] :]
    moved = slope[:, None] * _shift(fit, readings, rows)
    return ReadingLaw(misfit, covariance, np.sqrt(noise), np.sqrt(own), moved)


def _shift(fit: Fit, readings: Readings, rows: Index) -> Array:
    """Latent shift (n, D) of the readings by one sd of each setting error."""
    setting = readings.setting[rows]
    if not setting.any():
        return np.zeros_like(setting)
    slopes = fit.surface.slopes(readings.X[rows])
    return np.tensordot(fit.surface.weights, slopes, axes=1) * setting
