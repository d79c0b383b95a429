"""Roots of increasing functions, many at once, each within bounds of its own."""

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

_FINE = 16 * np.finfo(float).eps
_TURNS = 400  # each third one halves the bounds: 133 halvings take any width below rounding


def increasing_root(
    function: Callable[[Floats], tuple[Floats, Floats]], low: ArrayLike, high: ArrayLike
) -> Floats:
    """Return where an increasing function is 0, element by element.

    Newton steps, kept within bounds that shrink: a step that leaves them, and every third one,
    is replaced by the midpoint, so that the bounds at least halve in three turns whatever the
    function does. Where the function has no sign change, the nearer bound is approached.

    Parameters
    ----------
    function
        Gives value and slope (above 0), each of the shape of its argument.
    low, high
        Bounds on the roots; shapes broadcast.

    Returns
    -------
    array
        Roots of the broadcast shape, to 16 units of rounding of max(1, root) or to the rounding
        of the function itself, whichever is coarser.
    """
    low, high = (np.array(side, dtype=float) for side in np.broadcast_arrays(low, high))
    root = (low + high) / 2
    closed = np.zeros(root.shape, dtype=bool)
    for turn in range(_TURNS):
        value, slope = function(root)
        low, high = np.where(value <= 0, root, low), np.where(value >= 0, root, high)
        step = value / slope
        fine = _FINE * np.maximum(1, np.abs(root))
        closed |= (np.abs(step) <= fine) | (high - low <= fine)
        if closed.all():
            break
        newton = root - step
        trusted = (newton > low) & (newton < high) & (turn % 3 != 2)
        moved = np.where(trusted, newton, (low + high) / 2)
        root = np.where(closed, root, moved)
    return root
