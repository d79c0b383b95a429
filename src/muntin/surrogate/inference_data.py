"""Draws as ArviZ's InferenceData, for diagnostics and plots of the user's own."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.draws import Draws
from muntin.surrogate.quiet import arviz

Array = NDArray[np.float64]


def inference_data(draws: Draws) -> Any:
    """`arviz.InferenceData` of K chains of N draws.

    posterior: hyperparameters by name on their natural scale, repeated ones as a vector; latent
    (U,), one a condition with its inside errors; scale_error_z (G,), standardised; nu of Student-t
    noise. sample_stats; log_likelihood and observed_data: reading (n,), in the order of the study,
    on the scale on which noise is additive; censored (n,): -1 below, 1 above that value.
    """
    chains = draws.eta.shape[:2]
    posterior = _hyperparameters(draws)
    posterior["latent"] = draws.latents.reshape(*chains, -1)
    if draws.z.shape[2]:
        posterior["scale_error_z"] = draws.z
    if draws.nu is not None:
        posterior["nu"] = draws.nu
    cells = draws.model.cells
    return arviz().from_dict(
        posterior=posterior,
        sample_stats=dict(draws.stats),
        log_likelihood={"reading": draws.log_likelihood.reshape(*chains, -1)},
        observed_data={"reading": cells.y, "censored": cells.censored[cells.cell]},
        dims={"reading": ["well"], "censored": ["well"], "latent": ["condition"]},
        attrs={"sampler": draws.sampler, "surrogate": draws.model.family.name},
    )


def _hyperparameters(draws: Draws) -> dict[str, Array]:
    """Hyperparameters (K, N) or (K, N, repeats) by name, natural scale."""
    values = np.exp(draws.theta).reshape(*draws.eta.shape)
    single: dict[str, Array] = {}
    repeated: dict[str, list[Array]] = {}
    for name, value in zip(draws.model.layout.names, np.moveaxis(values, 2, 0), strict=True):
        stem, _, number = name.partition("[")
        if number:
            repeated.setdefault(stem, []).append(value)
        else:
            single[name] = value
    return single | {stem: np.stack(v, axis=2) for stem, v in repeated.items()}
