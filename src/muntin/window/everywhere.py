"""What holds at many conditions at once, from joint posterior draws of the responses' surfaces."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.surrogate.joint_draws import JointDraws, draw_jointly
from muntin.surrogate.links import latent_of, mean_of
from muntin.window.coded import code, setting_sd
from muntin.window.probability import Target
from muntin.window.settings import settings_around

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

Array = NDArray[np.float64]
By = Literal["mean", "well", "kept"]
# Errors inside the link move f by a few tenths of a logit, over which a reading's law is smooth.
_Z, _W = np.polynomial.hermite_e.hermegauss(5)
# Over a tolerance the share that passes is all but a cubic.
_RULE = 2
_SURE = 1e-12


@dataclass(frozen=True, eq=False)
class Everywhere:
    """N equally likely processes drawn from the posterior, a surface a judged response.

    What a new well does is known but for its own errors once a process is given; those of several
    responses are taken as independent then. targets: by response, natural unit.
    """

    definition: Definition
    surfaces: Mapping[str, JointDraws]
    targets: Mapping[str, Target]

    @classmethod
    def drawn(cls, view: Assessment, anchors: pd.DataFrame, draws: int, seed: int) -> Everywhere:
        """Draws of all judged responses that the view has surfaces of, at valid anchors."""
        from muntin.window.assessment import target_of

        definition = view.study.definition
        X = code(definition, anchors)
        judged = [r for r in definition.judged if r.name in view.surfaces]
        streams = np.random.default_rng((seed, draws)).spawn(len(judged))
        surfaces = {
            r.name: draw_jointly(view.surfaces[r.name], X, draws, rng)
            for r, rng in zip(judged, streams, strict=True)
        }
        return cls(definition, surfaces, {r.name: target_of(r) for r in judged})

    def margin(self, frame: pd.DataFrame, by: By | None = None) -> Array:
        """How far (N, n) each condition (raw units) is from the edge in each process; not negative
        where it lies inside.

        By the mean: the process mean's way to its nearest target in latent units. By wells: the
        probit of the share of new wells that pass less that of the required probability.
        """
        by = by or self.definition.judged_by
        if by == "mean":
            return self._mean_margin(frame)
        from scipy.special import ndtri

        share = np.clip(self.share(frame, by), _SURE, 1.0 - _SURE)
        return np.asarray(ndtri(share) - ndtri(self.definition.required_probability))

    def share(self, frame: pd.DataFrame, by: By | None = None) -> Array:
        """Share (N, n) of new wells that pass at conditions (raw units) in each process; by
        "kept" while the factors are spread within kept_within.
        """
        by = by or self.definition.judged_by
        around = [(1.0, frame)]
        if by == "kept":
            around = [*settings_around(self.definition, frame, _RULE)]
        return np.sum([weight * self._wells(moved) for weight, moved in around], axis=0)

    def _wells(self, frame: pd.DataFrame) -> Array:
        X, setting = code(self.definition, frame), setting_sd(self.definition, frame)
        out: Array | float = 1.0
        for name, draws in self.surfaces.items():
            wander = draws.wander(X, setting) if setting.any() else np.zeros((1, 1))
            out = out * share_of_wells(draws, draws.at(X), self.targets[name], wander)
        return np.asarray(out)

    def _mean_margin(self, frame: pd.DataFrame) -> Array:
        X = code(self.definition, frame)
        every = []
        for name, draws in self.surfaces.items():
            f, target, ceiling = draws.at(X), self.targets[name], draws.errors.ceiling[:, None]
            if np.isfinite(target.low):
                every.append(f - latent_of(draws.link, target.low, ceiling))
            if np.isfinite(target.high):
                every.append(latent_of(draws.link, target.high, ceiling) - f)
        return np.min(every, axis=0)


def share_of_wells(draws: JointDraws, f: Array, target: Target, wander: Array) -> Array:
    """Share (N, n) of new wells, each on a plate of its own, whose reading meets a target, given
    the latent f (N, n) of each process and the latent variance of setting errors (N, n).
    """
    errors = draws.errors
    inside = (errors.inside**2).sum(1)[:, None] + wander
    noise = errors.noise[:, None] ** 2
    if draws.link != "logit":
        low, high = (latent_of(draws.link, end) for end in (target.low, target.high))
        return _between(f, low, high, np.sqrt(inside + noise))
    scale, ceiling = (errors.scale**2).sum(1)[:, None], errors.ceiling[:, None]
    sd, out = np.sqrt(inside), np.zeros(f.shape)
    for z, weight in zip(_Z, _W / _W.sum(), strict=True):
        g = mean_of("logit", f + z * sd, ceiling)
        out += weight * _between(g, target.low, target.high, np.sqrt(noise + scale * g * g))
    return out


def _between(middle: Array, low: Array | float, high: Array | float, sd: Array) -> Array:
    """Chance that a normal variable lies between two limits, either of them maybe infinite."""
    from scipy.special import ndtr

    above = ndtr((high - middle) / sd) if np.all(np.isfinite(high)) else 1.0
    return np.asarray(above - ndtr((low - middle) / sd) if np.all(np.isfinite(low)) else above)
