"""Expected improvement (Jones, Schonlau & Welch 1998), on its logarithm."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from muntin.surrogate.links import Link

Array = NDArray[np.float64]
_T, _T_WEIGHTS = np.polynomial.legendre.leggauss(40)


def log_expected_improvement(mean: ArrayLike, sd: ArrayLike, best: ArrayLike) -> Array:
    """ln E[(f - best)+] for f ~ N(mean, sd^2); finite far below `best`, -inf where sd is 0 there.

    EI = sd (z Phi(z) + phi(z)), z = (mean - best) / sd (their eq. 15).
    """
    from scipy.special import erfcx, ndtr

    m, s, b = np.broadcast_arrays(*(np.asarray(v, dtype=float) for v in (mean, sd, best)))
    safe = np.where(s > 0.0, s, 1.0)
    z = (m - b) / safe
    log_phi = -0.5 * z**2 - 0.5 * np.log(2.0 * np.pi)
    with np.errstate(divide="ignore", invalid="ignore"):
        near = np.log(z * ndtr(z) + np.exp(log_phi))
        # Phi(z) / phi(z) through the scaled complementary error function, without underflow.
        ratio = np.sqrt(np.pi / 2.0) * erfcx(-np.minimum(z, -1.0) / np.sqrt(2.0))
        far = log_phi + np.log1p(np.minimum(z, -1.0) * ratio)
        farther = log_phi - 2.0 * np.log(np.maximum(-z, 1.0))
        value = np.where(z > -1.0, near, np.where(z > -1e4, far, farther)) + np.log(safe)
        certain = np.log(np.maximum(m - b, 0.0))
    return np.where(s > 0.0, value, certain)


def log_improvement_of_mean(
    link: Link, mean: Array, sd: Array, best: Array, rising: bool = True
) -> Array:
    """ln E[(g(f) - g(best))+] on the raw scale, or of the fall below g(best) if not rising.

    mean, sd, best: latent, broadcast. By parts, E[(g(f) - g(b))+] is the integral over t > 0 of
    g'(b + t) P(f > b + t).
    """
    if link == "identity":
        sign = 1.0 if rising else -1.0
        return log_expected_improvement(sign * mean, sd, sign * best)
    from scipy.special import log_expit, log_ndtr, logsumexp

    sign = 1.0 if rising else -1.0
    z = sign * (mean - best) / sd
    # The integrand dies over max(z, 0) + 8 sds, sooner where z is far below 0.
    reach = np.maximum(z, 0.0) + 8.0 / (1.0 + np.maximum(-z, 0.0) / 4.0)
    tau = 0.5 * reach[..., None] * (_T + 1.0)
    f = best[..., None] + sign * tau * sd[..., None]
    log_slope = log_expit(f) + log_expit(-f) if link == "logit" else f
    log_weight = np.log(0.5 * reach * sd)[..., None] + np.log(_T_WEIGHTS)
    return np.asarray(logsumexp(log_weight + log_slope + log_ndtr(z[..., None] - tau), axis=-1))
