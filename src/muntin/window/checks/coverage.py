"""How the readings lie in what the others predict for them, leaving out one at a time."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.surrogate.evenness import evenness
from muntin.surrogate.fit import Stack
from muntin.window.checks.check import Check

Array = NDArray[np.float64]
# Two-sided level 0.003 of a standard normal score, for each of the two scores.
_UNEVEN = 3.0
_FEWEST = 8
_TOO_SURE = ": predictions are too sure; read more conditions, or state errors that wells share"


def coverage(response: Response, stack: Stack, calm: Stack) -> list[Check]:
    """Share of readings inside their leave-one-out 90 % range, against its binomial 99 % limits,
    and whether their transforms lie evenly (the smooth test at level 0.003).

    calm: the fits by which evenness is judged, without wild wells. Too narrow or shifted
    predictions are serious; predictions wider than need be are a note.
    """
    from scipy.stats import binom

    pit = _transforms(stack)
    n, hits = len(pit), int(((pit > 0.05) & (pit < 0.95)).sum())
    least = int(binom.ppf(0.005, n, 0.9))
    few = hits < least
    doubt, serious = _doubt(_transforms(calm), few)
    sentence = (
        f"{response.label}: {hits} of {n} readings lie in the 90 % range predicted from the "
        f"others ({least} or more expected){_TOO_SURE if few else ''}{doubt}."
    )
    passed = not few and not doubt
    return [Check("coverage", passed, few or serious or not doubt, sentence, response.name)]


def _transforms(stack: Stack) -> Array:
    pit = stack.shares @ np.stack([fit.loo.pit for fit in stack.fits])
    return np.asarray(pit[np.isfinite(pit)])


def _doubt(pit: Array, few: bool) -> tuple[str, bool]:
    """What the transforms (n,) say against the predictions, beyond too `few` of them inside, and
    whether that is serious.
    """
    if len(pit) < _FEWEST:
        return "", False
    found = evenness(pit)
    said = []
    if abs(found.side) > _UNEVEN:
        said.append(f"most lie {'above' if found.side > 0 else 'below'} what is predicted")
    if found.width > _UNEVEN and not few:
        said.append(f"too many lie far out{_TOO_SURE}")
    serious = bool(said)
    if found.width < -_UNEVEN:
        said.append("they lie closer than predicted, so the window may be larger than shown")
    return "".join(f"; {text}" for text in said), serious
