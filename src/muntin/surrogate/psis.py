"""Leave-one-out predictions by Pareto-smoothed importance sampling over draws.

Vehtari, Gelman & Gabry 2017; Vehtari, Simpson, Gelman, Yao & Gabry 2024.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.draws import Draws
from muntin.surrogate.loo import LeaveOneOut
from muntin.surrogate.quiet import arviz

Array = NDArray[np.float64]
# Above it a prediction from smoothed weights is not to be relied on (Vehtari et al. 2024).
RELIABLE = 0.7


def psis_leave_one_out(draws: Draws, efficiency: float) -> tuple[LeaveOneOut, Array]:
    """Predictions of every reading from the others, and Pareto k (n,) of each one's weights.

    efficiency: effective draws a draw. The transform of a censored reading is NaN.
    """
    y = draws.model.cells.y
    law, log_like = draws.law, draws.log_likelihood
    with np.errstate(over="ignore"):
        log_w, k = arviz().psislw(-log_like.T, reff=min(efficiency, 1.0))
    log_w, k = np.asarray(log_w).T, np.asarray(k)
    w = np.exp(log_w)
    mean = (w * law.centre).sum(0)
    variance = (w * (law.width**2 + (law.centre - mean) ** 2)).sum(0)
    pit = np.clip((w * law.below(y)).sum(0), 0.0, 1.0)
    censored = draws.model.cells.censored[draws.model.cells.cell]
    pit = np.where(censored == 0, pit, np.nan)
    log_density = np.logaddexp.reduce(log_w + log_like)
    return LeaveOneOut(log_density, mean, np.sqrt(variance), pit), k
