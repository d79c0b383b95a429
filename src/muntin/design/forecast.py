"""Forecast: the share of the range that would still be called wrongly, well by well."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.design.excursion import expected_wrong
from muntin.design.outlook import Outlook
from muntin.window.predicted import Predicted
from muntin.window.probability import Target

Array = NDArray[np.float64]
_DRAWS = 256


@dataclass(frozen=True)
class Tails:
    """Chances today (P,) that the process mean lies above the lower and below the upper limit;
    None where there is no such limit.
    """

    above: Array | None
    below: Array | None

    @classmethod
    def of(cls, predicted: Predicted) -> Tails:
        """The tails of a response at P conditions."""
        low, high = Target(low=predicted.target.low), Target(high=predicted.target.high)
        return cls(
            None if np.isinf(low.low) else predicted.process_met(low),
            None if np.isinf(high.high) else predicted.process_met(high),
        )

    @property
    def meets(self) -> Array:
        """Chance (P,) that both limits are met."""
        above = 1.0 if self.above is None else self.above
        below = 1.0 if self.below is None else self.below
        return np.clip(above + below - 1.0, 0.0, 1.0)


def wrong_share(outlooks: Sequence[Outlook], today: Sequence[Tails]) -> float:
    """Expected share of the judged points called wrongly once the picks so far are read.

    The mixture of nodes is matched by one Gaussian a point that keeps today's chances, so that
    without picks the mean of min(p, 1 - p) results. One one-sided response has a closed form;
    else the verdicts are averaged over Sobol' draws of what the posterior means may become.
    """
    from scipy.special import ndtr, ndtri
    from scipy.stats.qmc import Sobol

    rho = [_explained_share(o) for o in outlooks]
    if len(outlooks) == 1 and (today[0].above is None or today[0].below is None):
        return float(expected_wrong(score(today[0].meets), rho[0]).mean())
    points = Sobol(len(outlooks), rng=np.random.default_rng(0)).random(_DRAWS)
    joint = np.ones((_DRAWS, len(outlooks[0].judged)))
    for r, tails in enumerate(today):
        above, below = score(tails.above), score(tails.below)
        shift = ndtri(np.clip(points[:, [r]], 1e-6, 1.0 - 1e-6)) * np.sqrt(rho[r])
        left = np.sqrt(1.0 - rho[r])
        both = ndtr((above + shift) / left) + ndtr((below - shift) / left) - 1.0
        joint *= np.maximum(both, 0.0)
    return float(np.minimum(joint, 1.0 - joint).mean())


def score(p: Array | None) -> Array:
    """Standard normal score of a chance; infinite where there is no limit."""
    from scipy.special import ndtri

    if p is None:
        return np.array(np.inf)
    return np.asarray(ndtri(np.clip(p, 1e-15, 1.0 - 1e-15)))


def _explained_share(outlook: Outlook) -> Array:
    """Share (P,) of the latent variance, nodes apart included, that the picks explain."""
    w = outlook.surface.weights
    total = w @ (outlook.variance + (outlook.mean - w @ outlook.mean) ** 2)
    return np.clip((w @ outlook.explained) / total, 0.0, 1.0 - 1e-9)
