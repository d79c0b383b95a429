"""What setting errors make of a reading: noisy-input regression.

A well set a little off its condition reads the surface there; to first order that adds the variance
sum_d (dg/dx_d)^2 sd_d^2 to its noise, with the slope of the posterior mean (McHutchon & Rasmussen
2011, eqs 4-5). The slope comes from a fit without that noise, then from one with it.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.assembly import nodes_of
from muntin.surrogate.evidence import Evidence, Model
from muntin.surrogate.hyperparameters import mode

Array = NDArray[np.float64]
_PASSES = 2


def settled_wander(model: Model, start: Array | None = None) -> tuple[Model, Array | None]:
    """The model with the latent variance (C,) that setting errors give a reading of each cell, and
    the mode eta (H,) of its last pass; the model itself and the start where nothing was set with
    error. start: a mode nearby (H,), whose model has a wander nearby, so that one pass is enough.
    """
    if not model.cells.setting.any():
        return model, start
    eta = start
    for _ in range(_PASSES if start is None else 1):
        eta, top = mode(model, eta)
        model = replace(model, wander=_wander(model, top))
    return model, eta


def _wander(model: Model, top: Evidence) -> Array:
    own = top.root.shape[2]
    approx = top.approximation
    nodes = nodes_of(model, top.theta, top.root, approx.mean[:, :own], approx.V[:, :own, :own])
    slopes = nodes.slopes(model.cells.X)[0][model.cells.latent]
    return np.asarray(((slopes * model.cells.setting) ** 2).sum(-1))
