"""Where the truth of simulated data sets lies in the posterior of an engine.

Talts, Betancourt, Simpson, Vehtari & Gelman 2018: over data sets drawn from the model the place of
every quantity in its posterior must be uniform. The fast engine knows its posterior distribution
function; of NUTS the rank among thinned draws is taken.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.draws import Draws
from muntin.surrogate.fit import Stack, fit_stack, link_of
from muntin.surrogate.links import mean_of
from muntin.surrogate.nodes import Surface
from muntin.window.predicted import Predicted
from muntin.window.probability import Target, latent_law, skewed_below
from tests.benchmarks.simulated import COLUMNS, Setup, Simulated, simulate

Array = NDArray[np.float64]
NEW = ("latent value", "process mean", "future reading")
# One less than a multiple of the 20 points of the bands, so that ranks cannot fall on them.
RANKS = 99
DRAWS = 500


@dataclass(frozen=True)
class Places:
    """Places (N, quantities) in [0, 1] of the truth of N data sets, quantities by name."""

    names: tuple[str, ...]
    values: Array

    def of(self, name: str) -> Array:
        """Places (N,) of one quantity."""
        return np.asarray(self.values[:, self.names.index(name)])


def below(values: Array, weights: Array, truth: Array) -> Array:
    """Weighted distribution function (H,) of nodes values (S, H) at truth (H,): linear between the
    nodes, each of which has half of its weight on either side of it.
    """
    out = np.empty(len(truth))
    for h, value in enumerate(truth):
        order = np.argsort(values[:, h])
        w = weights[order]
        reached = np.cumsum(w) - 0.5 * w
        ends = (0.5 * reached[0], 0.5 * (1.0 + reached[-1]))
        out[h] = np.interp(value, values[order, h], reached, *ends)
    return out


def wander_of(setup: Setup, surface: Surface, x: Array) -> Array | float:
    """Latent variance (S, 1) that setting errors make of a new well, 0 where there are none."""
    return surface.wander(x, np.full(x.shape, setup.setting)) if setup.setting else 0.0


def fitted(setup: Setup, data: Simulated) -> Stack:
    """The fast engine on one data set."""
    return fit_stack((setup.name,), data.readings, setup.kind, COLUMNS, setup.priors, 1)


def expected(setup: Setup, data: Simulated, stack: Stack, target: Target) -> Predicted:
    """What the tool says of the new condition."""
    setting = np.full(data.x.shape, setup.setting or 0.0)
    return Predicted.of(stack.surface, data.x, target, setting)


def placed(setup: Setup, data: Simulated, stack: Stack) -> Array:
    """Places of the truth in the fast engine's posterior: hyperparameters, then those of NEW."""
    fit, law = stack.fits[0], stack.surface.cloud or stack.surface
    moments = law.latent(data.x)
    z = (data.latent - moments.mean) / np.sqrt(moments.variance)
    found = np.array(
        [
            *below(fit.theta, fit.weights, data.theta),
            (law.weights @ skewed_below(z, latent_law(moments).skew))[0],
            1.0 - expected(setup, data, stack, Target(low=data.mean)).process_met()[0],
            1.0 - expected(setup, data, stack, Target(low=data.reading)).met()[0],
        ]
    )
    # A truth above the highest ceiling of the nodes lies at the end of the last bin.
    return np.minimum(found, np.nextafter(1.0, 0.0))


def fast_places(setup: Setup, sets: int, report: Callable[[int], None] = lambda _: None) -> Places:
    """Places in the fast engine's posteriors; every data set has wells of its own."""
    values = []
    for seed in range(sets):
        data = simulate(setup, seed)
        stack = fitted(setup, data)
        values.append(placed(setup, data, stack))
        report(seed + 1)
    return Places((*stack.fits[0].names, *NEW), np.array(values))


def ranked(setup: Setup, data: Simulated, draws: Draws, rng: np.random.Generator) -> Array:
    """Places of the truth among RANKS thinned draws, in the order of `placed`."""
    surface = draws.surface(link_of(setup.kind), RANKS, 1)
    index = np.linspace(0, len(draws) - 1, RANKS).round().astype(np.intp)
    mean, variance = (m[:, 0] for m in surface.moments(data.x))
    errors, link = surface.errors, link_of(setup.kind)
    f = mean + np.sqrt(variance) * rng.normal(size=RANKS)
    inside = np.sqrt((errors.inside**2).sum(1) + np.ravel(wander_of(setup, surface, data.x)))
    scale = np.sqrt((errors.scale**2).sum(1)) * rng.normal(size=RANKS)
    moved, noise = f + inside * rng.normal(size=RANKS), errors.noise * rng.normal(size=RANKS)
    if link == "log":
        reading = np.exp(moved + noise)
    else:
        reading = (1.0 + scale) * mean_of(link, moved, errors.ceiling) + noise
    new = np.stack([f, mean_of(link, f, errors.ceiling), reading], axis=1)
    values = np.concatenate([draws.theta[index], new], axis=1)
    truth = np.array([*data.theta, data.latent, data.mean, data.reading])
    return ((values < truth).sum(axis=0) + 0.5) / (RANKS + 1)


def nuts_places(setup: Setup, sets: int, report: Callable[[int], None] = lambda _: None) -> Places:
    """Places among draws of NUTS; all data sets share their wells, so that the model is compiled
    once and only the readings are exchanged. Needs nutpie; without censored readings and setting
    errors, which would change the model.
    """
    import nutpie

    from muntin.surrogate.nuts import _latents
    from muntin.surrogate.symbolic import pymc_model

    rng, values, compiled = np.random.default_rng(9), [], None
    for seed in range(sets):
        data = simulate(setup, seed, design=0)
        fit = fitted(setup, data).fits[0]
        cells, near = fit.model.cells, _latents(fit)
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", FutureWarning)
            if compiled is None:
                compiled = nutpie.compile_pymc_model(
                    pymc_model(fit.model, near=near, exchangeable=True)
                )
            found = nutpie.sample(
                compiled.with_data(y=cells.y, cell_mean=cells.mean, near=near),
                draws=DRAWS,
                tune=DRAWS,
                chains=2,
                cores=1,
                seed=seed,
                progress_bar=False,
                save_warmup=False,
                target_accept=0.95,
            )
        eta, w, z = (found.posterior[name].to_numpy() for name in ("eta", "w", "z"))
        draws = Draws(model=fit.model, eta=eta, w=w, z=z, nu=None, stats={}, sampler="nutpie")
        values.append(ranked(setup, data, draws, rng))
        report(seed + 1)
    return Places((*fit.names, *NEW), np.array(values))
