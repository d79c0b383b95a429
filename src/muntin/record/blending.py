"""Blending: shares of bottles that make what is asked, where contents add up by volume.

With shares s >= 0 of b bottles, contents A (q, b) and what is asked t (q,): A s = t and sum s = 1.
Every mix of as few bottles as may be is a basic solution of these equations: one with linearly
independent columns, and so the only one of its bottles.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
_NONE = 1e-9


def blends(contents: Floats, asked: Floats) -> list[Floats]:
    """Return the mixes of as few bottles as may be that make what is asked, best first.

    Best are those of the fewest bottles, among these the one whose smallest share is largest.

    Parameters
    ----------
    contents
        Shape (q, b): what each of b bottles holds of q things, any units.
    asked
        Shape (q,): what the mix is to hold of each, in the same units.

    Returns
    -------
    list of arrays of shape (b,)
        Shares of the volume, each 0 or above, sum 1. Empty where no mix makes it.
    """
    things, bottles = contents.shape
    size = np.maximum(np.abs(contents).max(axis=1, initial=0.0), np.abs(asked))
    scale = np.where(size > 0, size, 1.0)
    left = np.vstack([contents / scale[:, None], np.ones(bottles)])
    right = np.append(asked / scale, 1.0)
    found = []
    for count in range(1, min(things + 1, bottles) + 1):
        for chosen in combinations(range(bottles), count):
            shares = _shares(left[:, chosen], right)
            if shares is not None:
                whole = np.zeros(bottles)
                whole[list(chosen)] = shares
                found.append(whole)
    return sorted(found, key=lambda s: (np.count_nonzero(s), -s[s > 0].min()))


def _shares(left: Floats, right: Floats) -> Floats | None:
    """The one solution of a set of bottles, None where there is none with all of them in it."""
    shares, _, rank, _ = np.linalg.lstsq(left, right, rcond=None)
    if rank < left.shape[1] or (shares <= _NONE).any():
        return None
    if np.abs(left @ shares - right).max() > _NONE:
        return None
    total: Floats = shares / shares.sum()
    return total
