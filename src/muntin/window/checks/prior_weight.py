"""How much the answer leans on the priors, and whether the readings contradict them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.surrogate.assembly import nodes_of
from muntin.surrogate.fit import Fit, Stack
from muntin.surrogate.links import Link
from muntin.surrogate.nodes import Surface, mixture
from muntin.surrogate.power_scaling import ALPHAS, prior_scaled, sensitivity
from muntin.window.checks.check import Check
from muntin.window.grid import judged_grid

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# A hyperparameter so many sds of its prior away is beyond what the prior holds likely; the built-in
# priors are for any process, so that some processes lie a little beyond one of them.
_FAR_OWN, _FAR = 2.0, 3.0
# A fit of less of the answer than this does not speak for it.
_SPEAKS = 0.1
_FEW_GROUPS = 5
# On this side of the built-in priors the predictions are only wider than need be.
_CAUTIOUS = {
    "noise_sd": -1.0,
    "ceiling_gap": -1.0,
    "process_sd": -1.0,
    "curvature_sd": -1.0,
    "length_scale": 1.0,
}
_NODES = 24
_GRID = 144
# Share of the range; a window that moves by more with its priors rests on them.
_MOVES = 0.1


def prior_weight(view: Assessment, response: Response, stack: Stack) -> list[Check]:
    """Power-scaling of the priors of one response's hyperparameters (Kallioinen et al. 2024).

    A conflict, prior and readings both moving a hyperparameter that lies more than two sds of the
    study's own prior away, or three of a built-in one, is serious. Sds of shared errors are told
    apart by few groups only, so the prior moves them in every ordinary study; they count from five
    groups on.
    """
    conflicts = [
        text
        for fit, share in zip(stack.fits, stack.shares, strict=True)
        if share >= _SPEAKS
        for text in _conflicts(view, response, fit)
    ]
    if conflicts:
        said = " and ".join(dict.fromkeys(conflicts))
        sentence = (
            f"{response.label}: the readings contradict a prior: {said}; look at the readings, or "
            "state what is known of it in the priors of the response."
        )
        return [Check("priors", False, True, sentence, response.name)]
    if not response.judged:
        sentence = f"{response.label}: the readings do not contradict the priors."
        return [Check("priors", True, True, sentence, response.name)]
    move = _move(view, response, stack)
    sentence = (
        f"{response.label}: the readings do not contradict the priors; a quarter more or less "
        f"weight on them moves the window by {_points(move)} of the range"
    )
    passed = move <= _MOVES
    sentence += "." if passed else ", so it rests on them; more readings would settle it."
    return [Check("priors", passed, passed, sentence, response.name)]


def _points(move: float) -> str:
    return f"{100 * move:.0f} %" if move >= 0.01 else "under 1 %"


def _conflicts(view: Assessment, response: Response, fit: Fit) -> list[str]:
    found, layout = sensitivity(fit.posterior), fit.model.layout
    texts = []
    for h in np.flatnonzero(found.conflict):
        name, prior = layout.names[h], layout.priors[h]
        key, _, number = name.removesuffix("]").partition("[")
        own = key in response.priors
        cautious = found.place[h] * _CAUTIOUS.get(key, 0.0) > 0.0
        near = abs(found.place[h]) <= (_FAR_OWN if own else _FAR)
        if near or (cautious and not own) or _untold(fit, key, number):
            continue
        of = ""
        if key == "length_scale":
            of = f" of {view.study.definition.factors[int(number)].label}"
        low, high = (prior.median * np.exp(z * 1.96 * prior.log_sd) for z in (-1.0, 1.0))
        value = prior.median * np.exp(found.place[h] * prior.log_sd)
        texts.append(
            f"{key}{of} is drawn to {value:.2g}, where the prior says {low:.2g} to {high:.2g}"
        )
    return texts


def _untold(fit: Fit, key: str, number: str) -> bool:
    """Whether it is the sd of a shared error of which there are few groups."""
    cells = fit.model.cells
    if key == "inside_error":
        return len(np.unique(cells.inside[:, int(number)])) < _FEW_GROUPS
    return key == "scale_error" and cells.scale_groups[int(number)] < _FEW_GROUPS


def _move(view: Assessment, response: Response, stack: Stack) -> float:
    """Largest change of the window's share of the range while the priors are scaled."""
    kept = [(f, s) for f, s in zip(stack.fits, stack.shares, strict=True) if s > 0.0]
    thinned = [_thinned(fit, stack.surface.link) for fit, _ in kept]
    shares = np.array([s for _, s in kept])
    surfaces = [surface for surface, _ in thinned]
    grid, _ = judged_grid(view.study.definition, _GRID)
    base = _share(view, response, mixture(surfaces, shares), grid)
    moves = []
    for a in range(len(ALPHAS)):
        scaled = [_reweighted(s, factors[a]) for s, factors in thinned]
        moves.append(abs(_share(view, response, mixture(scaled, shares), grid) - base))
    return max(moves)


def _thinned(fit: Fit, link: Link) -> tuple[Surface, Sequence[Array]]:
    """A few nodes of a fit by systematic resampling, and what each power makes of their weights."""
    posterior = fit.posterior
    weights, evidence = np.exp(posterior.log_weights), posterior.evidence
    ticks = (np.arange(_NODES) + 0.5) / _NODES
    picked = np.searchsorted(np.cumsum(weights), ticks * weights.sum())
    index, count = np.unique(np.minimum(picked, len(weights) - 1), return_counts=True)
    root, approx = evidence.root[index], evidence.approximation
    own = root.shape[2]
    mean, V = approx.mean[index][:, :own], approx.V[index][:, :own, :own]
    part = nodes_of(fit.model, evidence.theta[index], root, mean, V)
    factors = [prior_scaled(posterior, alpha)[index] / weights[index] for alpha in ALPHAS]
    return Surface((part,), count / _NODES, link), factors


def _reweighted(surface: Surface, factor: Array) -> Surface:
    weights = surface.weights * factor
    return replace(surface, weights=weights / weights.sum())


def _share(view: Assessment, response: Response, surface: Surface, grid: pd.DataFrame) -> float:
    definition = view.study.definition
    by: Literal["mean", "well"] = "mean" if definition.judged_by == "mean" else "well"
    other = replace(view, surfaces={**view.surfaces, response.name: surface})
    return float((other.judged(grid, by) >= definition.required_probability).mean())
