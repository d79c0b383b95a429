"""Which surrogate predicts readings that it has not seen better, and by how much."""

from __future__ import annotations

import numpy as np

from muntin.record.responses import Response
from muntin.surrogate.fit import Stack
from muntin.window.checks.check import Check

_TITLES = {"gp": "the Gaussian process", "quadratic": "the quadratic"}


def comparison(response: Response, stack: Stack) -> list[Check]:
    """Difference in expected log predictive density with its standard error (Vehtari, Gelman &
    Gabry 2017, eqs 23-24) and the stacking shares; told, never a failure.
    """
    if len(stack.fits) < 2:
        return []
    first, second = stack.fits
    each = first.loo.log_density - second.loo.log_density
    gain, error = float(each.sum()), float(np.sqrt(len(each) * each.var()))
    better, worse = (first, second) if gain >= 0 else (second, first)
    titles = _TITLES[better.name], _TITLES[worse.name]
    how = "better than" if abs(gain) > 2.0 * error else "about as well as"
    shares = " and ".join(
        f"{_TITLES[f.name]} {100 * s:.0f} %" for f, s in zip(stack.fits, stack.shares, strict=True)
    )
    sentence = (
        f"{response.label}: {titles[0]} predicts readings {how} {titles[1]} (log density "
        f"{abs(gain):.1f} ± {error:.1f} higher); {shares} of the answer."
    )
    return [Check("gp against quadratic", True, False, sentence, response.name)]
