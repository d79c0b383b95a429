"""Weights of nodes moved to a neighbouring posterior."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
_ENOUGH = 8.0
_POWERS = (1.0, 0.8, 0.6, 0.4, 0.2, 0.1, 0.0)


def normalised(log_weights: Array) -> Array:
    """Log weights (S,) whose weights sum to 1."""
    return log_weights - np.logaddexp.reduce(log_weights)


def effective(log_weights: Array) -> float:
    """Effective number of nodes of normalised log weights (S,)."""
    return float(np.exp(-np.logaddexp.reduce(2.0 * log_weights)))


def tempered(log_weights: Array, log_factor: Array) -> tuple[Array, float]:
    """Normalised log weights (S,) times a factor (S,), and the power to which it was taken.

    Where few nodes would carry the weight the factor is tempered until _ENOUGH of them do, or half
    of those that do now (as in annealed importance sampling, Neal 2001); the posterior then stays
    between the two.
    """
    enough = min(_ENOUGH, 0.5 * effective(normalised(log_weights)))
    for power in _POWERS:
        moved = normalised(log_weights + power * log_factor)
        if effective(moved) >= enough:
            break
    return moved, power
