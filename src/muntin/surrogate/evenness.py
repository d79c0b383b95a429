"""Whether probability integral transforms lie evenly between 0 and 1.

A model that predicts well has even transforms (Gneiting, Balabdaoui & Raftery 2007, section 3).
The smooth test of Neyman (1937) looks at two departures that can be told in words: readings that
lie to one side of the predictions, and readings too often, or too seldom, in their tails.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Evenness:
    """Two scores that are standard normal, for many readings, where the predictions hold.

    side: above 0 where readings lie above the predictions. width: above 0 where they lie in the
    tails, so that the predictions are too narrow, below 0 where the predictions are too wide.
    """

    side: float
    width: float


def evenness(pit: Array, worth: float | None = None) -> Evenness:
    """The scores of transforms pit (n,); the first two orthonormal Legendre polynomials, averaged.

    worth: number of independent readings that they are worth; n where they are independent.
    """
    if not len(pit):
        return Evenness(0.0, 0.0)
    root = np.sqrt(len(pit) if worth is None else worth)
    side = np.sqrt(12.0) * (pit - 0.5)
    width = np.sqrt(5.0) * (6.0 * pit**2 - 6.0 * pit + 1.0)
    return Evenness(float(root * side.mean()), float(root * width.mean()))


def worth_of(n: int, likeness: float) -> float:
    """Independent readings that n are worth whose mean correlation is likeness (Kish 1965, section
    8.2, cited from memory).
    """
    return n / (1.0 + (n - 1.0) * min(max(likeness, 0.0), 1.0)) if n else 0.0
