"""Forecast: the share of the range that would still be called wrongly, well by well."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from muntin.design.excursion import expected_wrong
from muntin.design.outlook import Outlook
from muntin.surrogate.links import latent_of
from muntin.window.probability import Target

Array = NDArray[np.float64]
_DRAWS = 64


def wrong_share(
    outlooks: Sequence[Outlook], targets: Sequence[Target], today: Sequence[Array]
) -> float:
    """Expected share of the judged points called wrongly once the picks so far are read.

    today: p_mean (P,) of each response now. The mixture of nodes is matched by one Gaussian a
    point that keeps this probability, so that without picks the mean of min(p, 1 - p) results.
    """
    rho = [_explained_share(o) for o in outlooks]
    one_sided = np.isinf(targets[0].low) or np.isinf(targets[0].high)
    if len(outlooks) == 1 and one_sided:
        from scipy.special import ndtri

        c = ndtri(np.clip(today[0], 1e-15, 1.0 - 1e-15))
        return float(expected_wrong(c, rho[0]).mean())
    return _drawn(outlooks, targets, rho)


def _explained_share(outlook: Outlook) -> Array:
    """Share (P,) of the latent variance, nodes apart included, that the picks explain."""
    w = outlook.surface.weights
    total = w @ (outlook.variance + (outlook.mean - w @ outlook.mean) ** 2)
    return np.clip((w @ outlook.explained) / total, 0.0, 1.0 - 1e-9)


def _drawn(outlooks: Sequence[Outlook], targets: Sequence[Target], rho: list[Array]) -> float:
    """The same for several limits, over Sobol' draws of what the posterior means may become."""
    from scipy.special import ndtr, ndtri
    from scipy.stats.qmc import Sobol

    points = Sobol(len(outlooks), rng=np.random.default_rng(0)).random(_DRAWS)
    z = ndtri(np.clip(points, 1e-6, 1.0 - 1e-6))
    joint = np.ones((_DRAWS, len(outlooks[0].judged)))
    for r, (outlook, target) in enumerate(zip(outlooks, targets, strict=True)):
        w, link = outlook.surface.weights, outlook.surface.link
        mean = w @ outlook.mean
        sd = np.sqrt(w @ (outlook.variance + (outlook.mean - mean) ** 2))
        moved = mean + z[:, [r]] * np.sqrt(rho[r]) * sd
        left = np.sqrt(1.0 - rho[r]) * sd
        high = ndtr((latent_of(link, target.high) - moved) / left)
        joint *= high - ndtr((latent_of(link, target.low) - moved) / left)
    return float(np.minimum(joint, 1.0 - joint).mean())
