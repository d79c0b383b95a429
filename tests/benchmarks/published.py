"""Published functions to be searched, turned and scaled so that the best value is the highest.

Branin's function and Hartmann's function of three variables are those of the test set of Dixon &
Szegoe 1978, *Towards Global Optimisation* 2, pp. 1-15. Their coefficients are from memory;
`test_published.py` holds them to the published minima.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

BRANIN_LEAST, BRANIN_MOST = 10.0 / (8.0 * np.pi), 308.1290960116067
HARTMANN_LEAST = -3.86278

_A = np.array([[3.0, 10.0, 30.0], [0.1, 10.0, 35.0]] * 2)
_C = np.array([1.0, 1.2, 3.0, 3.2])
_P = np.array(
    [
        [0.3689, 0.1170, 0.2673],
        [0.4699, 0.4387, 0.7470],
        [0.1091, 0.8732, 0.5547],
        [0.0381, 0.5743, 0.8828],
    ]
)


def branin(X: ArrayLike) -> Floats:
    """Branin's function (n,) of X (n, 2), x1 from -5 to 10 and x2 from 0 to 15."""
    x1, x2 = np.asarray(X, dtype=float).T
    b, c, t = 5.1 / (4.0 * np.pi**2), 5.0 / np.pi, 1.0 / (8.0 * np.pi)
    return (x2 - b * x1**2 + c * x1 - 6.0) ** 2 + 10.0 * (1.0 - t) * np.cos(x1) + 10.0


def hartmann(X: ArrayLike) -> Floats:
    """Hartmann's function (n,) of X (n, 3), each from 0 to 1."""
    away = (np.asarray(X, dtype=float)[:, None, :] - _P) ** 2
    return -(np.exp(-(_A * away).sum(axis=2)) @ _C)


def branin_signal(X: ArrayLike) -> Floats:
    """Branin's function upside down: 0 where it is highest in its range, 100 at its minima."""
    return 100.0 * (BRANIN_MOST - branin(X)) / (BRANIN_MOST - BRANIN_LEAST)


def hartmann_signal(X: ArrayLike) -> Floats:
    """Hartmann's function upside down: 0 far from its minima, 100 at the least of them."""
    return 100.0 * hartmann(X) / HARTMANN_LEAST


def disk(X: ArrayLike) -> Floats:
    """Squared distance (n,) of X (n, 2) from the middle of Branin's range.

    At most 50 it is the disk of Gelbart, Snoek & Adams 2014 (*Proc. UAI*), from memory: of the
    three minima only that at (pi, 2.275) lies in it.
    """
    x1, x2 = np.asarray(X, dtype=float).T
    return (x1 - 2.5) ** 2 + (x2 - 7.5) ** 2
