"""Wells that may beat the best condition so far, in batch.

After each pick the surface is conditioned on its own posterior mean there (Ginsbourger, Le Riche
& Carraro 2010): the mean stays, the variance falls. The mark to beat is the best posterior mean
among conditions that were run or picked, and what is to beat it is the posterior mean once the
well is read (Picheny, Ginsbourger, Richet & Caplin 2013, at the median): a noisy well, or one
that only repeats what its plate shares, promises little. Without noise this is the usual expected
improvement.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.design.improvement import log_improvement_of_mean
from muntin.design.outlook import Outlook
from muntin.surrogate.links import latent_of, mean_of
from muntin.surrogate.nodes import Surface
from muntin.window.probability import Target

Array = NDArray[np.float64]
_DRAWS = 128


@dataclass(frozen=True)
class BestCriterion:
    """Log expected improvement at the candidates.

    outlooks: one a judged response, their judged points being the candidates. run: coded
    conditions (n, D) that were run. One response with a one-sided target is improved itself; else
    the improvement is that of the joint chance that a well meets all targets.
    """

    outlooks: tuple[Outlook, ...]
    targets: tuple[Target, ...]
    run: Array

    def values(self, picked: list[int]) -> Array:
        """Log expected improvement (Q,) at all candidates, given the picks so far."""
        target = self.targets[0]
        one_sided = np.isinf(target.low) or np.isinf(target.high)
        if len(self.outlooks) == 1 and one_sided:
            return self._of_response(self.outlooks[0], np.isinf(target.high), picked)
        return self._of_success(picked)

    def _of_response(self, outlook: Outlook, rising: bool, picked: list[int]) -> Array:
        from scipy.special import logsumexp

        known = [outlook.mean[:, picked]]
        if len(self.run):
            known.append(outlook.surface.moments(self.run)[0])
        marks = np.concatenate(known, axis=1)
        if not marks.shape[1]:
            marks = np.median(outlook.mean, axis=1, keepdims=True)
        mark = marks.max(axis=1) if rising else marks.min(axis=1)
        sd = np.sqrt(np.maximum(outlook.own_gain(), 1e-12))
        log_ei = log_improvement_of_mean(
            outlook.surface.link,
            outlook.mean,
            sd,
            np.broadcast_to(mark[:, None], sd.shape),
            rising,
        )
        log_w = np.log(outlook.surface.weights * outlook.surface.errors.ceiling)[:, None]
        return np.asarray(logsumexp(log_ei + log_w, axis=0))

    def _of_success(self, picked: list[int]) -> Array:
        from scipy.special import ndtri
        from scipy.stats.qmc import Sobol

        sobol = Sobol(len(self.outlooks), rng=np.random.default_rng(0)).random(_DRAWS)
        z = ndtri(np.clip(sobol, 1e-6, 1.0 - 1e-6))
        drawn = np.ones((_DRAWS, len(self.outlooks[0].judged)))
        hoped = np.ones(drawn.shape[1])
        mark = np.ones(len(self.run) + len(picked))
        for r, (outlook, target) in enumerate(zip(self.outlooks, self.targets, strict=True)):
            surface = outlook.surface
            mean, sd = _matched(surface, outlook.mean, outlook.own_gain())
            drawn *= _success(surface, mean + z[:, [r]] * sd, target)
            hoped *= _success(surface, mean, target)
            run = surface.weights @ surface.moments(self.run)[0] if len(self.run) else np.zeros(0)
            mark *= _success(surface, np.concatenate([run, mean[picked]]), target)
        over = np.maximum(drawn - mark.max(initial=0.0), 0.0).mean(axis=0)
        # Where no draw improves, the chance of success itself ranks, below any improvement.
        return np.log(over + 1e-12 * hoped + 1e-300)


def _matched(surface: Surface, mean: Array, variance: Array) -> tuple[Array, Array]:
    """Mean and sd (n,) of the mixture of the nodes (S, n)."""
    w = surface.weights
    total = w @ mean
    return total, np.sqrt(w @ (variance + (mean - total) ** 2))


def _success(surface: Surface, f: Array, target: Target) -> Array:
    """Chance that a reading of a well with latent f, elementwise, meets the target."""
    from scipy.special import ndtr

    noise = float(surface.weights @ surface.errors.noise)
    link = surface.link
    if link == "logit":
        g = mean_of(link, f, float(surface.weights @ surface.errors.ceiling))
        low, high = target.low, target.high
    else:
        g, low, high = f, float(latent_of(link, target.low)), float(latent_of(link, target.high))
    return np.asarray(ndtr((high - g) / noise) - ndtr((low - g) / noise))
