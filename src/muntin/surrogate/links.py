"""Links between a latent value and the process mean that a well reads.

A fraction levels off at a ceiling of its own, 1 or a little less: what a hold-up keeps back no
condition brings out. Its process mean is g(f) = ceiling / (1 + exp(-f)).
"""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]
Link = Literal["identity", "logit", "log"]


def mean_of(link: Link, latent: ArrayLike, ceiling: ArrayLike = 1.0) -> Array:
    """Process mean g(f) on the raw scale of the response, elementwise; `ceiling` of a fraction."""
    f = np.asarray(latent, dtype=float)
    if link == "logit":
        from scipy.special import expit

        return np.asarray(ceiling, dtype=float) * np.asarray(expit(f))
    return np.exp(f) if link == "log" else f


def latent_of(link: Link, value: ArrayLike, ceiling: ArrayLike = 1.0) -> Array:
    """Latent value at which the process mean is `value`; infinite beyond the range of g."""
    y = np.asarray(value, dtype=float)
    if link == "identity":
        return y
    with np.errstate(divide="ignore"):
        if link == "log":
            return np.log(np.maximum(y, 0.0))
        inside = np.clip(y / np.asarray(ceiling, dtype=float), 0.0, 1.0)
        return np.log(inside) - np.log1p(-inside)


def slope_of(link: Link, latent: ArrayLike, ceiling: ArrayLike = 1.0) -> Array:
    """Derivative g'(f) of the process mean, elementwise."""
    f = np.asarray(latent, dtype=float)
    if link == "logit":
        g = mean_of(link, f)
        return np.asarray(ceiling, dtype=float) * g * (1.0 - g)
    return np.exp(f) if link == "log" else np.ones_like(f)
