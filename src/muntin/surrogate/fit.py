"""Fit of one surrogate to one response, and of the stack of both."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.assembly import nodes_of
from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.cloud import DRAWS, cloud_of
from muntin.surrogate.coding import Columns
from muntin.surrogate.compression import compressed
from muntin.surrogate.convergence import Sampling
from muntin.surrogate.draws import Draws
from muntin.surrogate.evidence import Evidence, Family, Model
from muntin.surrogate.hyperparameters import Posterior, integrate
from muntin.surrogate.links import Link
from muntin.surrogate.loo import LeaveOneOut
from muntin.surrogate.nodes import Surface, mixture
from muntin.surrogate.nuts import Nuts, resampled
from muntin.surrogate.polynomial import Quadratic
from muntin.surrogate.priors import Kind, Priors
from muntin.surrogate.process import GaussianProcess
from muntin.surrogate.refits import leave_one_out_of, less, nothing, start_of
from muntin.surrogate.skewness import skew_of
from muntin.surrogate.stacking import stacking_shares
from muntin.surrogate.threads import threads_for
from muntin.surrogate.wander import settled_wander

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_NEGLIGIBLE = 2e-3
_LEAST_DRAWS = 64
SURROGATES = ("gp", "quadratic")


@dataclass(frozen=True)
class Fit:
    """One surrogate fitted to one response.

    surface: its nodes. theta (S, H) and weights (S,): all hyperparameter nodes, log scale, named
    by names. loo: leave-one-out predictions. ess, k_hat: of the importance weights.
    log_marginal: log marginal likelihood. laplace: nodes without a fixed point, used as Laplace's.
    model and posterior: what was fitted, and the fast engine's nodes. sampling and draws: of the
    engine nuts, whose surface, nodes and predictions are then those above; None with the fast one.
    """

    name: str
    surface: Surface
    names: tuple[str, ...]
    theta: Array
    weights: Array
    loo: LeaveOneOut
    ess: float
    k_hat: float
    log_marginal: float
    laplace: int
    model: Model
    posterior: Posterior
    sampling: Sampling | None = None
    draws: Draws | None = None


@dataclass(frozen=True)
class Stack:
    """The fits of one response and their stacking shares (K,); surface is their mixture, by the
    fast engine with a cloud where that tells more.
    """

    fits: tuple[Fit, ...]
    shares: Array
    surface: Surface


def link_of(kind: Kind) -> Link:
    """The link from a latent value to the process mean of a kind of response."""
    links: dict[Kind, Link] = {"fraction": "logit", "positive": "log", "real": "identity"}
    return links[kind]


def _engine_link(kind: Kind) -> Link:
    """The link to the scale on which noise is additive: positive readings come as logarithms."""
    return "logit" if kind == "fraction" else "identity"


def family_of(name: str, columns: Columns, priors: Priors) -> Family:
    """The surrogate `gp` or `quadratic`."""
    if name == "gp":
        return GaussianProcess(columns, priors)
    if name == "quadratic":
        return Quadratic(columns, priors)
    raise ValueError(f"surrogate {name!r} is none of {', '.join(SURROGATES)}")


def fit_surrogate(
    name: str, readings: Readings, kind: Kind, columns: Columns, priors: Priors, seed: int
) -> Fit:
    """Fit one surrogate; readings lie on the scale where noise is additive (ln y if positive)."""
    return _fitted(name, _model(name, readings, kind, columns, priors), link_of(kind), seed)


def brief_stack(
    names: Sequence[str],
    readings: Readings,
    kind: Kind,
    columns: Columns,
    priors: Priors,
    seed: int,
    nodes: int,
    starts: Mapping[str, Array],
) -> Stack:
    """The stack by the fast engine in brief: so many hyperparameter nodes a round (a power of two),
    no reading refitted, no cloud of draws. starts: where to search the mode, by surrogate, as
    `starts_of` a fit to nearly the same readings gives them; empty where there is none.
    """
    models = [_model(n, readings, kind, columns, priors) for n in names]
    fits = tuple(
        _fitted(name, model, link_of(kind), seed, starts.get(name), nodes)
        for name, model in zip(names, models, strict=True)
    )
    shares = stacking_shares(np.stack([fit.loo.log_density for fit in fits]))
    return Stack(fits, shares, mixture([fit.surface for fit in fits], shares))


def starts_of(stack: Stack) -> dict[str, Array]:
    """Where (H,) to search the mode of fits to a few readings more or less, by surrogate."""
    return {fit.name: start_of(fit.posterior) for fit in stack.fits}


def _model(name: str, readings: Readings, kind: Kind, columns: Columns, priors: Priors) -> Model:
    return Model(family_of(name, columns, priors), collapse(readings), _engine_link(kind))


def _fitted(
    name: str,
    model: Model,
    link: Link,
    seed: int,
    start: Array | None = None,
    nodes: int | None = None,
) -> Fit:
    with threads_for(len(model.cells.X)):
        model, start = settled_wander(model, start)
        posterior = integrate(model, seed, nodes, start)
        evidence, weights = posterior.evidence, np.exp(posterior.log_weights)
        surface = _surface(model, evidence, weights, link)
        loo = leave_one_out_of(model, posterior, seed, refit=nodes is None)
    return Fit(
        name=name,
        surface=surface,
        names=model.layout.names,
        theta=evidence.theta,
        weights=weights,
        loo=loo,
        ess=posterior.ess,
        k_hat=posterior.k_hat,
        log_marginal=posterior.log_marginal,
        laplace=len(evidence.approximation.laplace),
        model=model,
        posterior=posterior,
    )


def fit_stack(
    names: Sequence[str],
    readings: Readings,
    kind: Kind,
    columns: Columns,
    priors: Priors,
    seed: int,
    engine: Nuts | None = None,
) -> Stack:
    """Fit the surrogates named and stack them by leave-one-out predictive density.

    engine: settings of the reference engine; None for the fast one. Raises NotInstalledError.
    """
    fits = tuple(fit_surrogate(n, readings, kind, columns, priors, seed) for n in names)
    if engine is None:
        return _stacked(fits, seed)
    fits = tuple(resampled(fit, seed, engine) for fit in fits)
    shares = stacking_shares(np.stack([fit.loo.log_density for fit in fits]))
    return Stack(fits, shares, mixture([fit.surface for fit in fits], shares))


def stack_without(stack: Stack, rows: Index, seed: int) -> Stack:
    """The fits of all readings but those of some rows, by the fast engine, searched from the fits
    of all; leave-one-out predictions are those of the readings left.
    """
    return _stacked(tuple(_without(fit, rows, seed) for fit in stack.fits), seed)


def _stacked(fits: tuple[Fit, ...], seed: int) -> Stack:
    """The stack of fits by the fast engine, with a cloud of draws."""
    shares = stacking_shares(np.stack([fit.loo.log_density for fit in fits]))
    surfaces = [
        _clouded(fit, share, seed) if share > 0.0 else fit.surface
        for fit, share in zip(fits, shares, strict=True)
    ]
    return Stack(fits, shares, mixture(surfaces, shares))


def _clouded(fit: Fit, share: float, seed: int) -> Surface:
    """The surface of a fit with as many draws as its share asks."""
    draws = max(_LEAST_DRAWS, int(DRAWS * share))
    with threads_for(len(fit.model.cells.X)):
        cloud = cloud_of(fit.model, fit.posterior, fit.surface.link, draws, seed)
    return replace(fit.surface, cloud=cloud)


def _without(fit: Fit, rows: Index, seed: int) -> Fit:
    """The cells stay as they are; in those left empty stands a reading that says nothing."""
    cells, posterior = fit.model.cells, fit.posterior
    for i in rows:
        cells = less(cells, int(i), nothing(fit.model, posterior))
    model = replace(fit.model, cells=cells)
    found = _fitted(fit.name, model, fit.surface.link, seed, start_of(posterior))
    left = np.setdiff1d(np.arange(len(cells.y)), rows)
    loo = LeaveOneOut(**{name: values[left] for name, values in vars(found.loo).items()})
    return replace(found, loo=loo)


def prior_surface(
    name: str,
    kind: Kind,
    columns: Columns,
    priors: Priors,
    shared: tuple[int, int],
    seed: int,
    nodes: int = 32,
) -> Surface:
    """The surface before any reading; shared: numbers of inside and of scale errors."""
    from scipy.special import ndtri
    from scipy.stats.qmc import Sobol

    none = np.zeros(0, dtype=np.intp)
    empty = Readings(
        X=np.zeros((0, len(columns.factor))),
        y=np.zeros(0),
        sd=np.zeros(0),
        inside=(none,) * shared[0],
        scale=(none,) * shared[1],
    )
    model = Model(family_of(name, columns, priors), collapse(empty), _engine_link(kind))
    layout = model.layout
    points = Sobol(len(layout), rng=np.random.default_rng(seed)).random(nodes)
    theta = layout.theta(ndtri(np.clip(points, 1e-6, 1.0 - 1e-6)))
    root = model.family.root(layout, theta, model.cells)
    width = root.shape[2]
    V = np.broadcast_to(np.eye(width), (nodes, width, width))
    part = nodes_of(model, theta, root, np.zeros((nodes, width)), V)
    return Surface((part,), np.full(nodes, 1.0 / nodes), link_of(kind))


def _surface(model: Model, evidence: Evidence, weights: Array, link: Link) -> Surface:
    """The nodes that carry weight, made few; the rest, together _NEGLIGIBLE, is left out."""
    order = np.argsort(-weights)
    enough = int(np.searchsorted(np.cumsum(weights[order]), 1.0 - _NEGLIGIBLE)) + 1
    keep = np.sort(order[:enough])
    root, approx = evidence.root[keep], evidence.approximation
    own = root.shape[2]
    mean, V = approx.mean[keep][:, :own], approx.V[keep][:, :own, :own]
    skew = skew_of(model.rows(evidence.theta), approx).take(keep) if approx.skewed else None
    part = nodes_of(model, evidence.theta[keep], root, mean, V, skew)
    surface = Surface((part,), weights[keep] / weights[keep].sum(), link)
    return compressed(surface, model.family.columns, model.cells)
