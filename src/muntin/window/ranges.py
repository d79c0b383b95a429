"""The spans of bench steps that are handed over: found on a grid, settled between its nodes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.window.boxes import Span, largest_span, settled, share_of
from muntin.window.coded import code, setting_sd
from muntin.window.predicted import Predicted
from muntin.window.steps import Judged, Steps, evenly, grid_of

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment
    from muntin.window.window import Window

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Nodes a factor where there is no grid, by the number of factors with a range.
_NODES = (0, 61, 31, 14, 8, 5, 4)
_SCOUTS = 32
# Factors in which the ranges are exact, how near the edge steps are judged, how many at most.
_EXACT, _BAND, _MOST_FILLED, _MOST_BOXES = 2, 0.02, 4000, 1e8
_TWO = (0, 1)
# Ranges elsewhere are worth a word where they are larger by this.
_LARGER = 1.02


@dataclass(frozen=True, eq=False)
class Spans:
    """held: the largest span that holds the set point. larger: a larger one that does not."""

    held: Span | None
    larger: Span | None


@dataclass(frozen=True, eq=False)
class Start:
    """Where ranges are looked for: nodes, a list of steps a factor, and what is known at them.

    whole: whether the nodes are all bench steps, each judged, so that nothing lies between them.
    """

    seen: Judged
    nodes: list[Index]
    whole: bool = False


def spans_of_window(view: Assessment, window: Window, judged: Judged, at: Index) -> Spans:
    """The spans of a window whose set point has index (F,) among the steps of `judged`, which knows
    the window's grid. Exact where the grid has every bench step, and in two factors.
    """
    required = view.study.definition.required_probability
    if judged(at[None])[0] < required:
        return Spans(None, None)
    nodes = judged.nodes()
    if not (window.regular and nodes):
        nodes = _sparse_nodes(judged.steps, at)
        seen = Judged(judged.steps, lambda frame: scouted(view, frame))
        seen(grid_of(nodes))
        seen.known[tuple(at.tolist())] = 1.0
        return settled_spans(judged, required, at, Start(seen, nodes))
    every = [np.arange(k) for k in judged.steps.counts]
    if all(map(np.array_equal, nodes, every)):
        return settled_spans(judged, required, at, Start(judged, nodes, whole=True))
    filled = filled_in(judged, required, nodes, at) if len(nodes) == _EXACT else None
    finer = None if filled is None else Start(filled, every)
    return settled_spans(judged, required, at, Start(judged, nodes), finer)


def settled_spans(
    judged: Judged, required: float, at: Index, start: Start, finer: Start | None = None
) -> Spans:
    """The spans from a start, settled by what is judged; that which holds the set point from a
    finer one where there is one.
    """
    held = _settled(judged, required, finer or start, at)
    larger = largest_span(start.seen, required, start.nodes)
    if larger is None or larger.holds(at):
        return Spans(held, None)
    larger = _settled(judged, required, start, None)
    least = 0.0 if held is None else _LARGER * share_of(judged.steps, held)
    if larger is None or larger.holds(at) or share_of(judged.steps, larger) <= least:
        return Spans(held, None)
    return Spans(held, larger)


def _settled(judged: Judged, required: float, start: Start, holding: Index | None) -> Span | None:
    span = largest_span(start.seen, required, start.nodes, holding)
    if span is None or start.whole:
        return span
    return settled(judged, required, span, start.nodes, holding)


def filled_in(judged: Judged, required: float, nodes: list[Index], at: Index) -> Judged | None:
    """All bench steps of two factors, from nodes that are known: those of every cell whose corners
    lie on both sides of the required probability, or near it, are judged, others are taken to lie
    on the side of their corners. None where these, or the boxes about index (F,), would be many.
    """
    counts = judged.steps.counts.astype(float)
    if min(len(n) for n in nodes) < 2 or np.prod((at + 1) * (counts - at)) > _MOST_BOXES:
        return None
    p = judged(grid_of(nodes)).reshape([len(n) for n in nodes])
    corners = np.stack([p[i : len(p) - 1 + i, j : p.shape[1] - 1 + j] for i in _TWO for j in _TWO])
    near = (corners.min(axis=0) < required + _BAND) & (corners.max(axis=0) > required - _BAND)
    every = grid_of([np.arange(k) for k in judged.steps.counts])
    places = zip(nodes, every.T, strict=True)
    cell = tuple(np.searchsorted(n[1:-1], column, side="right") for n, column in places)
    asked = near[cell]
    if asked.sum() > _MOST_FILLED:
        return None
    allowed = np.asarray(judged.steps.definition.allowed(judged.steps.frame(every)), dtype=float)
    inside = (corners.min(axis=0) >= required)[cell] * allowed
    inside[asked] = judged(every[asked])
    filled = dict(zip(map(tuple, every.tolist()), inside.tolist(), strict=True))
    return Judged(judged.steps, judged.ask, filled | judged.known)


def scouted(view: Assessment, frame: pd.DataFrame) -> Array:
    """About the judged probability (n,) at conditions (raw units), fast: by few nodes, responses
    independent, a tolerance taken as if the bench set factors with its sd.
    """
    definition = view.study.definition
    X, setting = code(definition, frame), setting_sd(definition, frame)
    if definition.judged_by == "kept":
        setting = np.hypot(setting, setting_sd(_set_as_kept(definition), frame) / np.sqrt(3.0))
    out = np.ones(len(frame))
    for response in definition.judged:
        surface = view.surfaces.get(response.name)
        if surface is None:
            continue
        from muntin.window.assessment import target_of

        few = surface.lightened(_SCOUTS)
        predicted = Predicted.of(few, X, target_of(response), setting)
        out *= predicted.process_met() if definition.judged_by == "mean" else predicted.met()
    return out


def _set_as_kept(definition: Definition) -> Definition:
    """The definition with the half-width of each tolerance for the sd of setting."""
    factors = [f.model_copy(update={"set_sd": f.kept_within}) for f in definition.factors]
    return definition.model_copy(update={"factors": tuple(factors)})


def _sparse_nodes(steps: Steps, at: Index) -> list[Index]:
    """Few steps of each factor, evenly, the first and the last among them, and those of `at`."""
    most = _NODES[len(steps.names)]
    counts = steps.counts.tolist()
    return [evenly(0, k - 1, most, here) for k, here in zip(counts, at.tolist(), strict=True)]
