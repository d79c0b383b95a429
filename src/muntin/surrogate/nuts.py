"""The reference engine: the model of the fast engine, sampled without approximation.

The no-U-turn sampler (Hoffman & Gelman 2014) of nutpie, or PyMC's own where that is not installed.
"""

from __future__ import annotations

import warnings
import zlib
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.convergence import Sampling, efficiency_of
from muntin.surrogate.draws import Draws
from muntin.surrogate.evidence import Model
from muntin.surrogate.psis import psis_leave_one_out
from muntin.surrogate.quiet import nutpie, pymc
from muntin.surrogate.symbolic import Noise, pymc_model

if TYPE_CHECKING:
    from muntin.surrogate.fit import Fit

Array = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True)
class Nuts:
    """How to sample: chains, draws and tuning draws of each, the acceptance aimed at, cores.

    noise: "student" for Student-t noise, which wild wells pull less. nodes: of the surface, at
    most. progress: show a bar. own: PyMC's own sampler even where nutpie is installed.
    """

    chains: int = 4
    draws: int = 1000
    tune: int = 1000
    accept: float = 0.98
    cores: int = 2
    noise: Noise = "normal"
    nodes: int = 1000
    progress: bool = False
    own: bool = False


def resampled(fit: Fit, seed: int, settings: Nuts | None = None) -> Fit:
    """A fit of the fast engine with surface, nodes and leave-one-out predictions from draws."""
    settings = settings or Nuts()
    draws = sample(fit.model, seed, settings, _latents(fit))
    r_hat, bulk, tail, typical = efficiency_of(draws)
    loo, pareto_k = psis_leave_one_out(draws, typical / len(draws))
    chains, length = draws.eta.shape[:2]
    divergent = float(np.mean(draws.stats["diverging"]))
    sampling = Sampling(
        draws.sampler, chains, length, r_hat, bulk, tail, typical, divergent, pareto_k
    )
    return replace(
        fit,
        surface=draws.surface(fit.surface.link, settings.nodes, seed),
        theta=draws.theta,
        weights=np.full(len(draws), 1.0 / len(draws)),
        loo=loo,
        ess=bulk,
        k_hat=float("-inf"),
        laplace=0,
        sampling=sampling,
        draws=draws,
    )


def sample(model: Model, seed: int, settings: Nuts, near: Array | None = None) -> Draws:
    """Draws from the posterior; the same seed gives the same draws.

    near (U,): latent values not far from the posterior's, which make the sampling fast; they do
    not change the posterior. Raises NotInstalledError.
    """
    pm, fast = pymc(), None if settings.own else nutpie()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", FutureWarning)
        # Of compiled code, to those who write it.
        warnings.filterwarnings("ignore", message=r"np\.dot\(\) is faster on contiguous arrays")
        symbolic = pymc_model(model, settings.noise, near)
        number = _seed(model, seed)
        found = _by_nutpie(fast, symbolic, number, settings) if fast else None
        if found is None:
            found = _by_pymc(pm, symbolic, number, settings)
    posterior, stats = found.posterior, found.sample_stats
    eta = posterior["eta"].to_numpy()
    return Draws(
        model=model,
        eta=eta,
        w=posterior["w"].to_numpy(),
        z=posterior["z"].to_numpy(),
        nu=posterior["nu"].to_numpy() if "nu" in posterior else None,
        stats={k: stats[k].to_numpy() for k in ("diverging", "energy", "n_steps") if k in stats},
        sampler="nutpie" if fast else "PyMC",
    )


def _latents(fit: Fit) -> Array:
    """Posterior mean (U,) of the latent values by the fast engine."""
    evidence, weights = fit.posterior.evidence, np.exp(fit.posterior.log_weights)
    w = evidence.approximation.mean[:, : evidence.root.shape[2]]
    mean = weights @ (evidence.root @ w[..., None])[..., 0]
    return np.asarray(fit.model.family.priors.mean + mean)


def _seed(model: Model, seed: int) -> int:
    """A seed of the model's own, so that two responses do not share their random numbers."""
    mark = zlib.crc32(model.cells.y.tobytes(), zlib.crc32(model.family.name.encode()))
    return int(np.random.SeedSequence((seed, mark)).generate_state(1)[0] >> 1)


def _by_nutpie(nutpie: Any, symbolic: Any, seed: int, settings: Nuts) -> Any:
    return nutpie.sample(
        nutpie.compile_pymc_model(symbolic),
        draws=settings.draws,
        tune=settings.tune,
        chains=settings.chains,
        cores=settings.cores,
        seed=seed,
        save_warmup=False,
        progress_bar=settings.progress,
        target_accept=settings.accept,
    )


def _by_pymc(pm: Any, symbolic: Any, seed: int, settings: Nuts) -> Any:
    """One process only: more would start the user's script again where it has no main guard."""
    with symbolic:
        return pm.sample(
            draws=settings.draws,
            tune=settings.tune,
            chains=settings.chains,
            cores=1,
            random_seed=seed,
            target_accept=settings.accept,
            progressbar=settings.progress,
            compute_convergence_checks=False,
            nuts_sampler="pymc",
        )
