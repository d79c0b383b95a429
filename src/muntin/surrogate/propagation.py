"""Gaussian approximation of the latent values by expectation propagation (Minka 2001).

Every latent quantity is a linear map of whitened variables w ~ N(0, I). A cell contributes a
two-dimensional Gaussian site in the pair of its latent value and its scale error; all sites are
updated in parallel with damping, for S hyperparameter nodes at once (Rasmussen & Williams 2006,
section 3.6, in whitened form). For the identity link the sites
are the likelihood itself and one pass is exact.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.approximation import Approximation, join
from muntin.surrogate.laplace import laplace_evidence, laplace_sites
from muntin.surrogate.sites import Gaussian, Rows, Sites, natural
from muntin.surrogate.tilted import CellLikelihood, Pair, Rule, Tilted, place, rule_of, tilt

Array = NDArray[np.float64]
_LOG_2PI = float(np.log(2.0 * np.pi))
# Sweeps before settled nodes are set aside; the sum bounds the work on one node.
_FIRST_STAGES, _LAST_STAGES = (4, 2, 3, 4, 6), (10, 20, 20, 20)
# Moves that have not shrunk to this share over so many sweeps lead to no fixed point.
_SHRINKING = 0.7
_COARSE = rule_of(12)
# Nodes whose evidence is smaller by so many nats carry no weight.
_NEGLIGIBLE = 15.0
_FIRST_STEP, _LEAST_STEP, _LEAST_KEPT_STEP = 0.9, 0.4, 0.1
# A fixed point is taken as reached below this last move, in sds of a latent value; with sites kept
# from negative precisions, about which moves may go round without end, below that one.
_SETTLED, _SETTLED_KEPT = 0.05, 0.6


def approximate(
    rows: Rows, lik: CellLikelihood, start: Sites | None = None, tolerance: float = 3e-3
) -> Approximation:
    """The fixed point of expectation propagation, from `start` or from the Laplace mode.

    tolerance: largest last move of a latent mean, in its sd, or of a log sd. Where the noise is
    small against the shared errors a cell's law is a bent ridge and the free fixed point may have
    an improper cavity; such nodes are run again with sites kept from negative precisions, and
    taken as Laplace's where that fails too.
    """
    if lik.link == "identity" and not lik.censored.any():
        return _exact(rows, lik)
    sites, change = _fixed_point(rows, lik, start, tolerance, _FIRST_STAGES)
    state = _state(rows, lik, sites)
    open_nodes, weak = _still_open(rows, lik, state, change, tolerance)
    if len(open_nodes):
        some, few = rows.nodes(open_nodes), lik.nodes(open_nodes)
        moved, last = _fixed_point(some, few, sites.nodes(open_nodes), tolerance, _LAST_STAGES)
        change[open_nodes] = last
        state = state.replaced(open_nodes, _state(some, few, moved))
    failed = np.setdiff1d(state.failed(change), weak)
    if len(failed):
        some, few = rows.nodes(failed), lik.nodes(failed)
        stages = (*_FIRST_STAGES, *_LAST_STAGES)
        again, last = _fixed_point(some, few, None, tolerance, stages, kept=True)
        kept = _state(some, few, again)
        state, failed = state.replaced(failed, kept), failed[kept.failed(last, _SETTLED_KEPT)]
    linear = np.concatenate([weak, failed])
    if len(linear):
        some, few = rows.nodes(linear), lik.nodes(linear)
        state = state.replaced(linear, _state(some, few, laplace_sites(some, few), laplace=True))
    return replace(state.approximation, laplace=failed)


def _still_open(
    rows: Rows, lik: CellLikelihood, state: _State, change: Array, tolerance: float
) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Nodes that have not settled: those worth more sweeps, and those too weak beside the others,
    by Laplace's evidence, to matter. What has improper cavities has no evidence to be beside, and
    more sweeps of the same kind do not mend it.
    """
    settled = (change < tolerance) & np.isfinite(state.evidence) & state.proper
    unsettled = np.flatnonzero(~(change < tolerance))
    if not len(unsettled) or not settled.any():
        return unsettled[state.proper[unsettled]], unsettled[:0]
    some, few = rows.nodes(unsettled), lik.nodes(unsettled)
    evidence = laplace_evidence(Gaussian(some, laplace_sites(some, few)), few)
    weak = evidence < state.evidence[settled].max() - _NEGLIGIBLE
    return unsettled[~weak & state.proper[unsettled]], unsettled[weak]


@dataclass(frozen=True)
class _State:
    """The approximation at given sites, and whether (S,) all its cavities are proper unaided."""

    approximation: Approximation
    proper: NDArray[np.bool_]

    @property
    def evidence(self) -> Array:
        """Log evidence (S,)."""
        return self.approximation.log_evidence

    def failed(self, change: Array, most: float = _SETTLED) -> NDArray[np.intp]:
        """Nodes that are no proper fixed point, after last moves `change` (S,) of `most`."""
        settled = np.isfinite(self.evidence) & (change < most)
        return np.flatnonzero(~(self.proper & settled))

    def replaced(self, index: NDArray[np.intp], other: _State) -> _State:
        """The state with some nodes from another."""
        order = np.arange(len(self.proper))
        order[index] = len(order) + np.arange(len(index))
        both = join([self.approximation, other.approximation])
        return _State(both.nodes(order), np.concatenate([self.proper, other.proper])[order])


def _state(rows: Rows, lik: CellLikelihood, sites: Sites, laplace: bool = False) -> _State:
    """The state at sites; laplace: with the evidence of sites linearised at the mode."""
    gaussian = Gaussian(rows, sites)
    pair = gaussian.pair
    cavity, proper = _divide(pair, gaussian.sites)
    tilted = tilt(lik, cavity, pair.u, np.sqrt(pair.uu))
    if laplace:
        evidence = laplace_evidence(gaussian, lik)
    else:
        own = (tilted.log_z - _log_product(pair, cavity)).sum(1)
        evidence = gaussian.log_integral() + own
    none = np.zeros(0, dtype=np.intp)
    return _State(
        Approximation(gaussian.mean, gaussian.V, evidence, gaussian.sites, cavity, tilted, none),
        proper,
    )


def _fixed_point(
    rows: Rows,
    lik: CellLikelihood,
    start: Sites | None,
    tolerance: float,
    stages: tuple[int, ...],
    kept: bool = False,
) -> tuple[Sites, Array]:
    """Sites after as many sweeps as each node needs, and its last move (S,).

    stages: sweeps before settled nodes are set aside. kept: keep the sites from negative
    precisions.
    """
    sites = start or laplace_sites(rows, lik)
    change = np.full(len(lik.noise), np.inf)
    active = np.arange(len(change))
    for number, sweeps in enumerate(stages):
        if number == 1 and start is not None:
            lost = active[~(change[active] < 1.0)]
            if len(lost):
                sites = sites.replaced(lost, laplace_sites(rows.nodes(lost), lik.nodes(lost)))
        some, few = rows.nodes(active), lik.nodes(active)
        # The way there need not be followed as finely as the fixed point itself.
        coarse = number == 0 and len(stages) > 1 and not kept
        rule = _COARSE if coarse else None
        moved, last = _settle(some, few, sites.nodes(active), sweeps, kept, rule)
        stuck = (last > _SHRINKING * change[active]) & (sweeps >= _LAST_STAGES[0])
        sites, change[active] = sites.replaced(active, moved), last
        active = active[~((last < tolerance) & (not coarse)) & ~stuck]
        if not len(active):
            break
    return sites, change


def _settle(
    rows: Rows, lik: CellLikelihood, sites: Sites, sweeps: int, kept: bool, rule: Rule | None
) -> tuple[Sites, Array]:
    """A number of parallel sweeps; nodes whose moves grow are damped. Returns the last move."""
    gaussian = Gaussian(rows, sites)
    base = gaussian.pair
    step = np.full((len(lik.noise), 1), _FIRST_STEP)
    last = np.full(len(step), np.inf)
    for _ in range(sweeps):
        state = _sweep(gaussian, lik, base, kept, rule)
        moved = Gaussian(rows, gaussian.sites.toward(state.proposed, step))
        change = _change(gaussian.pair, moved.pair) / step[:, 0]
        factor = np.where(change > last, 0.6, 1.3)[:, None]
        step = np.clip(factor * step, _LEAST_KEPT_STEP if kept else _LEAST_STEP, _FIRST_STEP)
        gaussian, base, last = moved, state.pair, change
    return gaussian.sites, last


@dataclass(frozen=True)
class _Sweep:
    pair: Pair
    proposed: Sites


def _sweep(
    gaussian: Gaussian,
    lik: CellLikelihood,
    base: Pair,
    kept: bool = False,
    rule: Rule | None = None,
) -> _Sweep:
    """Cavities, tilted moments and the sites that would match them; quadrature placed at base."""
    cavity, _ = _divide(gaussian.pair, gaussian.sites)
    points = place(lik, cavity, base.u, np.sqrt(base.uu), rule)
    outer, pair = natural(cavity), points.pair()
    proposed = natural(pair).less(outer).where_finite(gaussian.sites)
    # A reading cannot tell more of its logit than 1/4 of a reading's precision; far above that
    # the quadrature has lost the law, and the site is held back.
    steepest = 0.25 if lik.link == "logit" else 1.0001
    most = steepest * lik.count / lik.base_variance
    proposed = proposed.times(np.minimum(1.0, most / np.maximum(proposed.uu, 1e-300)))
    if kept:
        proposed = _with_mean(proposed.proper(), outer, pair)
    return _Sweep(pair, proposed)


def _with_mean(sites: Sites, cavity: Sites, tilted: Pair) -> Sites:
    """The sites with shifts under which cavity times site has the tilted mean."""
    uu, us, ss = cavity.uu + sites.uu, cavity.us + sites.us, cavity.ss + sites.ss
    u = uu * tilted.u + us * tilted.s - cavity.u
    s = us * tilted.u + ss * tilted.s - cavity.s
    return Sites(u, s, sites.uu, sites.us, sites.ss)


def _divide(p: Pair, sites: Sites) -> tuple[Pair, NDArray[np.bool_]]:
    """Cavity: the pair less its own site, kept proper; and whether (S,) it was so unaided."""
    n = natural(p).less(sites)
    uu, ss = np.maximum(n.uu, 1e-9 / p.uu), np.maximum(n.ss, 1e-9 / p.ss)
    rim = np.sqrt(0.9999 * uu * ss)
    us = np.clip(n.us, -rim, rim)
    proper = ((n.uu == uu) & (n.ss == ss) & (n.us == us)).all(axis=1)
    det = uu * ss - us**2
    u, s = (ss * n.u - us * n.s) / det, (uu * n.s - us * n.u) / det
    return Pair(u, s, ss / det, -us / det, uu / det), proper


def _quadratic_form(p: Pair) -> Array:
    n = natural(p)
    return n.u * p.u + n.s * p.s


def _log_product(posterior: Pair, cavity: Pair) -> Array:
    """ln of the integral (S, C) of a cavity times its unnormalised site."""
    det = posterior.uu * posterior.ss - posterior.us**2
    det_cavity = cavity.uu * cavity.ss - cavity.us**2
    form = _quadratic_form(posterior) - _quadratic_form(cavity)
    return 0.5 * (np.log(det) - np.log(det_cavity) + form)


def _change(old: Pair, new: Pair) -> Array:
    """Largest move (S,) of a latent mean in sds, or of a log sd."""
    uu = np.maximum(new.uu, 1e-300)
    shift = np.abs(new.u - old.u) / np.sqrt(uu)
    spread = 0.5 * np.abs(np.log(uu / np.maximum(old.uu, 1e-300)))
    return np.maximum(shift, spread).max(axis=1, initial=0.0)


def _exact(rows: Rows, lik: CellLikelihood) -> Approximation:
    """The identity link: the sites are the likelihood, the answer is exact."""
    rv = lik.base_variance + lik.wander
    v = rv / lik.count
    y = np.broadcast_to(lik.mean - lik.offset, v.shape)
    zero = np.zeros_like(v)
    sites = Sites(y / v, zero, 1.0 / v, zero, zero)
    gaussian = Gaussian(rows, sites)
    post = gaussian.pair
    # Readings that lie on the surface to rounding leave nothing to a cell's own noise.
    left = np.maximum(1.0 - post.uu / v, 1e-12)
    spread = post.uu / left
    cavity = Pair((post.u - post.uu * y / v) / left, zero, spread, zero, np.ones_like(v))
    total = spread + v
    within = lik.log_within(zero)
    log_z = -0.5 * ((y - cavity.u) ** 2 / total + np.log(total) + _LOG_2PI) + within
    misfit = ((y - post.u) ** 2 + post.uu) / v**2 - 1.0 / v
    about = (lik.within / rv - (lik.count - 1.0)) / rv
    third = np.zeros((*v.shape, 4))
    tilted = Tilted(post, third, log_z, lik.noise * (misfit / lik.count + about), zero)
    own = -0.5 * (y**2 / v + np.log(v) + _LOG_2PI) + within
    evidence = gaussian.log_integral() + own.sum(1)
    none = np.zeros(0, dtype=np.intp)
    return Approximation(gaussian.mean, gaussian.V, evidence, sites, cavity, tilted, none)
