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
# Ranges elsewhere are worth a word where they are larger by this.
_LARGER = 1.02


@dataclass(frozen=True, eq=False)
class Spans:
    """held: the largest span that holds the set point. larger: a larger one that does not."""

    held: Span | None
    larger: Span | None


def spans_of_window(view: Assessment, window: Window, judged: Judged, at: Index) -> Spans:
    """The spans of a window whose set point has index (F,) among the steps of `judged`, which knows
    the window's grid. Exact where the grid has every bench step.
    """
    required = view.study.definition.required_probability
    if judged(at[None])[0] < required:
        return Spans(None, None)
    nodes, seen = judged.nodes(), judged
    whole = all(len(n) == k for n, k in zip(nodes, judged.steps.counts, strict=True))
    if not (window.regular and nodes):
        nodes = _sparse_nodes(judged.steps, at)
        seen = Judged(judged.steps, lambda frame: scouted(view, frame))
        seen(grid_of(nodes))
        seen.known[tuple(at.tolist())] = 1.0
    return settled_spans(judged, seen, required, nodes, at, whole and window.regular)


def settled_spans(
    judged: Judged, seen: Judged, required: float, nodes: list[Index], at: Index, whole: bool
) -> Spans:
    """The spans from nodes that `seen` knows, settled by what is judged; whole: the nodes are all
    bench steps, so that nothing lies between them.
    """
    held = largest_span(seen, required, nodes, at)
    larger = largest_span(seen, required, nodes)
    if not whole:
        if held is not None:
            held = settled(judged, required, held, nodes, at)
        if larger is not None and not larger.holds(at):
            larger = settled(judged, required, larger, nodes, None)
    if larger is None or larger.holds(at):
        return Spans(held, None)
    least = 0.0 if held is None else _LARGER * share_of(judged.steps, held)
    return Spans(held, larger if share_of(judged.steps, larger) > least else None)


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
