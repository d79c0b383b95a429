"""Leave-one-out predictions with a fit of their own where the nodes at hand cannot give them.

A reading that draws the hyperparameters to itself leaves its prediction to the one or two nodes
that know it least, and its neighbours' sites stay where it bent them. Such readings are few; each
is predicted by a fit without it (as Vehtari, Gelman & Gabry 2017, section 2, advise where the
weights fail).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.cells import Cells
from muntin.surrogate.evidence import Model
from muntin.surrogate.hyperparameters import Posterior, integrate
from muntin.surrogate.loo import LeaveOneOut, averaged, left_out, node_laws
from muntin.surrogate.tilted import CellLikelihood, Pair, tilt

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Below so many effective nodes a reading is predicted anew; the worst first, and no more than so
# many, nor where a fit is dear.
_FEW, _MOST, _MOST_LATENTS = 8.0, 4, 200
# Beside such a reading those that keep less than this share of the effective nodes are, too.
_SHARE = 1.0 / 3.0
# Nodes of a round of such a fit, and effective ones that are enough: as a rule two rounds, of which
# the second draws from a proposal fitted to the first.
_NODES, _ENOUGH = 64, 50.0
# Sd of a reading that says nothing, in sds of all that it can be.
_NOTHING = 1e3


def leave_one_out_of(
    model: Model, posterior: Posterior, seed: int, refit: bool = True
) -> LeaveOneOut:
    """Predictions (n,) of every reading from the others; seed: of the fits without one, which are
    made only if `refit`.
    """
    evidence, cells = posterior.evidence, model.cells
    approx, lik = evidence.approximation, model.likelihood(evidence.theta)
    law = node_laws(cells, lik, approx.cavity, approx.tilted)
    prior = evidence.prior_variance(cells)
    log_w = left_out(cells, law, approx, posterior.log_weights, prior)
    loo = averaged(law, log_w)
    refitted = (
        _fewest(log_w, posterior.ess)
        if refit and len(cells.X) <= _MOST_LATENTS
        else np.zeros(0, dtype=np.intp)
    )
    if not len(refitted):
        return loo
    anew = [_without(model, posterior, i, seed) for i in refitted]
    out = {k: v.copy() for k, v in vars(loo).items()}
    for name, values in out.items():
        values[refitted] = [vars(one)[name][0] for one in anew]
    return LeaveOneOut(**out)


def start_of(posterior: Posterior) -> Array:
    """Where (H,) to search the mode of a fit to fewer readings: the mean of the fit to all."""
    return np.asarray(np.exp(posterior.log_weights) @ posterior.eta)


def fit_of_fewer(fewer: Model, seed: int, start: Array) -> Posterior:
    """The posterior without one reading, whose mode is searched from `start`."""
    return integrate(fewer, seed, _NODES, start, _ENOUGH)


def nothing(model: Model, posterior: Posterior) -> float:
    """Variance of a reading that says nothing."""
    evidence = posterior.evidence
    if model.link != "identity":
        return _NOTHING**2
    noise = model.likelihood(evidence.theta).noise
    return _NOTHING**2 * float(evidence.prior_variance(model.cells).max() + noise.max())


def _fewest(log_weights: Array, every: float) -> Index:
    """Readings whose weights (S, n) rest on too few of the effective nodes, the worst first."""
    ess = _effective(log_weights)
    order = np.argsort(ess)[:_MOST]
    few = max(_FEW, _SHARE * every) if ess.min(initial=np.inf) < _FEW else _FEW
    return order[ess[order] < few]


def _without(model: Model, whole: Posterior, i: int, seed: int) -> LeaveOneOut:
    """Prediction (1,) of reading i by a fit without it, searched from the fit of all."""
    cells, c = model.cells, model.cells.cell[i]
    fewer = replace(model, cells=less(cells, i, nothing(model, whole)))
    posterior = fit_of_fewer(fewer, seed, start_of(whole))
    approx = posterior.evidence.approximation
    cavity = Pair(**{k: v[:, [c]] for k, v in vars(approx.cavity).items()})
    alone = _alone(cells, i)
    lik = _of_one(model.likelihood(posterior.evidence.theta), c)
    known = approx.tilted.pair
    tilted = tilt(lik, cavity, known.u[:, [c]], np.sqrt(known.uu[:, [c]]))
    law = node_laws(alone, lik, cavity, tilted)
    out = averaged(law, posterior.log_weights[:, None])
    told_by = posterior.log_weights[:, None] + law.log_density - out.log_density
    if _effective(told_by)[0] < _FEW:
        # A density far out hangs on the few nodes that come near; it is also the ratio of the
        # evidences with and without the reading.
        without = posterior.log_marginal - _log_nothing(model.cells, fewer.cells, c)
        out = replace(out, log_density=np.array([whole.log_marginal - without]))
    return out


def _effective(log_weights: Array) -> Array:
    """Effective nodes (n,) of normalised log weights (S, n)."""
    return np.asarray(np.exp(-np.logaddexp.reduce(2.0 * log_weights)))


def _log_nothing(cells: Cells, fewer: Cells, c: int) -> float:
    """Log density of the reading that says nothing, where one stands in cell c."""
    emptied = cells.count[c] == 1.0
    return -0.5 * float(np.log(2.0 * np.pi * fewer.variance[c])) if emptied else 0.0


def less(cells: Cells, i: int, nothing: float) -> Cells:
    """The cells without reading i; a cell left empty keeps one reading that says nothing."""
    c, y = cells.cell[i], cells.y[i]
    count, mean = cells.count.copy(), cells.mean.copy()
    within, variance, censored = cells.within.copy(), cells.variance.copy(), cells.censored.copy()
    if count[c] == 1.0:
        variance[c], censored[c] = nothing, 0
    else:
        away, left = y - mean[c], count[c] - 1.0
        within[c] = max(within[c] - away**2 * count[c] / left, 0.0)
        mean[c] -= away / left
        count[c] = left
    return replace(
        cells, count=count, mean=mean, within=within, variance=variance, censored=censored
    )


def _alone(cells: Cells, i: int) -> Cells:
    """The cell of reading i by itself, with that reading as the one to predict."""
    c = cells.cell[[i]]
    per_cell = ("latent", "count", "mean", "within", "variance", "censored", "setting")
    own = {name: getattr(cells, name)[c] for name in per_cell}
    scale = tuple(groups[c] for groups in cells.scale)
    return replace(cells, **own, scale=scale, cell=np.zeros(1, dtype=np.intp), y=cells.y[[i]])


def _of_one(lik: CellLikelihood, c: int) -> CellLikelihood:
    """The likelihood of one cell."""
    per_cell = ("mean", "count", "within", "variance", "censored", "wander")
    return replace(lik, **{name: getattr(lik, name)[[c]] for name in per_cell})
