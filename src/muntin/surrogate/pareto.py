"""Shape of the tail of importance weights."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def tail_shape(log_weights: Array) -> float:
    """Pareto k-hat of the largest weights (Vehtari et al. 2024, section 2.4); -inf if all equal.

    Below 0.7 the weighted averages can be relied on. log_weights (S,) need no normalisation.
    """
    w = np.sort(np.exp(log_weights - np.max(log_weights)))
    tail = int(np.ceil(min(0.2 * len(w), 3.0 * np.sqrt(len(w)))))
    if tail < 5:
        return float("inf")
    excess = w[-tail:] - w[-tail - 1]
    if excess[-1] <= 1e-12:
        return float("-inf")
    return generalised_pareto_shape(np.maximum(excess, 1e-300))


def generalised_pareto_shape(excess: Array) -> float:
    """Shape k of a generalised Pareto law (Zhang & Stephens 2009) from excess (n,) > 0, sorted.

    A prior at 0.5 worth ten observations steadies it (Vehtari et al. 2024, appendix C).
    """
    n = len(excess)
    points = 30 + int(np.sqrt(n))
    quartile = excess[int(n / 4.0 + 0.5) - 1]
    grid = 1.0 - np.sqrt(points / (np.arange(1, points + 1) - 0.5))
    theta = 1.0 / excess[-1] + grid / (3.0 * quartile)
    k = np.log1p(-theta[:, None] * excess[None]).mean(1)
    profile = n * (np.log(-theta / k) - k - 1.0)
    weights = np.exp(profile - profile.max())
    weights /= weights.sum()
    keep = weights >= 10.0 * np.finfo(float).eps
    best = float((theta[keep] * weights[keep]).sum() / weights[keep].sum())
    shape = float(np.log1p(-best * excess).mean())
    return (n * shape + 10.0 * 0.5) / (n + 10.0)
