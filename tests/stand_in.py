"""A stand-in for the sampler: draws from the fast engine's own nodes."""

from __future__ import annotations

from typing import Any

import numpy as np

from muntin.surrogate.draws import Draws
from muntin.surrogate.evidence import Model
from muntin.surrogate.hyperparameters import integrate
from muntin.surrogate.nuts import Nuts


def stand_in(model: Model, seed: int, settings: Nuts, near: Any = None) -> Draws:
    """As `muntin.surrogate.nuts.sample`, from the Gaussian of a node drawn by weight."""
    posterior = integrate(model, seed)
    evidence, rng = posterior.evidence, np.random.default_rng(seed)
    chains = settings.chains, settings.draws
    weights = np.exp(posterior.log_weights)
    nodes = rng.choice(len(weights), chains, p=weights / weights.sum())
    mean, V = evidence.approximation.mean, evidence.approximation.V
    roots = np.linalg.cholesky(V)[nodes]
    white = mean[nodes] + (roots @ rng.normal(size=(*chains, mean.shape[1], 1)))[..., 0]
    width, layout = evidence.root.shape[2], model.layout
    return Draws(
        model=model,
        eta=((evidence.theta - layout.log_median) / layout.log_sd)[nodes],
        w=white[..., :width],
        z=white[..., width:],
        nu=None,
        stats={"diverging": np.zeros(chains, dtype=bool)},
        sampler="stand-in",
    )
