"""What is handed over of a window: ranges that hold together, set point, edge, and what a repeat of
it is expected to bring.

Whatever is drawn rests on one set of joint posterior draws of the responses' surfaces and errors.
All of it is conditional on the model, its priors, the data, and what `[fixed]` says.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.factors import Factor
from muntin.window.assured import asked_levels, assurance_of, assured_span, holding_everywhere
from muntin.window.boxes import Box, Span, ranges_of, share_of
from muntin.window.everywhere import Everywhere
from muntin.window.largest import Bools
from muntin.window.margins import Margin, edge_table, margins_of
from muntin.window.ranges import Spans, spans_of_window
from muntin.window.repeats import Optimism, Repeat, optimism_of
from muntin.window.steps import Condition, Judged, Steps, condition_of

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

__all__ = ["Box", "Corner", "HandOver", "Margin", "Optimism", "Repeat", "hand_over"]

Array = NDArray[np.float64]
Index = NDArray[np.intp]
DRAWS = 1000
_ANCHORS = 64


@dataclass(frozen=True, kw_only=True)
class Corner:
    """One corner of the set point's tolerance: condition (raw units), and there the probability
    that a new well passes, p_well, and that the process mean does, p_mean.
    """

    condition: Condition
    p_well: float
    p_mean: float


@dataclass(frozen=True, kw_only=True, eq=False)
class HandOver:
    """A window in ranges and conditions.

    setpoint: condition of the highest judged probability (raw units), and probability: that. box:
    the largest ranges that hold the set point and in which every condition reaches the required
    probability; None where the set point does not reach it. larger: larger ranges that leave the
    set point out, with the same choices, or None. assured: the largest ranges within `box` that
    hold the set point and whose assurance reaches `asked_assurance`; None where none do. margins: a
    record for every side of every factor with a range; empty without a box. corners: of the set
    point's tolerance, worst first; empty where nothing has kept_within.

    edge: conditions at which the judged probability crosses the required one. Columns: the factors
    with the condition of the crossing (raw unit); factor, the one that is moved across; end, "low"
    or "high", the end of the window that it is; low and high, its central 95 % over the drawn
    processes, NaN where it lies beyond the range or past the middle of the window there; found, the
    share of processes that have their edge between. optimism: see there. draws, seed: of what was
    drawn.
    """

    setpoint: Condition
    probability: float
    required: float
    judged_by: str
    asked_assurance: float
    box: Box | None
    larger: Box | None
    assured: Box | None
    margins: tuple[Margin, ...]
    corners: tuple[Corner, ...]
    edge: pd.DataFrame
    optimism: Optimism
    draws: int
    seed: int


def hand_over(
    view: Assessment, assurance: float | None = None, draws: int = DRAWS, seed: int | None = None
) -> HandOver | None:
    """The hand-over of a study's window; None before any judged response was read.

    assurance: required of the whole box at once, the study's required_probability where None.
    seed: that of the assessment where None. The same seed gives the same numbers.
    """
    if view.fresh:
        return None
    definition, window = view.study.definition, view.window()
    required, by = definition.required_probability, definition.judged_by
    asked, seed = required if assurance is None else assurance, view.seed if seed is None else seed
    there = window.setpoint[[*definition.factor_names]].to_frame().T.reset_index(drop=True)
    setpoint = condition_of(there)
    judged = Judged(Steps.at(definition, setpoint), lambda frame: view.judged(frame, by))
    judged.learn(window.grid)
    at = judged.steps.index(there)[0]
    spans = spans_of_window(view, window, judged, at)
    everywhere = Everywhere.drawn(view, _anchors(judged.steps, spans, at), draws, seed)
    box, assured = _boxes(judged, everywhere, spans.held, at, asked)
    return HandOver(
        setpoint=setpoint,
        probability=float(window.setpoint["probability"]),
        required=required,
        judged_by=by,
        asked_assurance=asked,
        box=box,
        larger=_boxes(judged, everywhere, spans.larger, None, asked)[0],
        assured=assured,
        margins=margins_of(judged, required, at),
        corners=corners_of(view, setpoint),
        edge=edge_table(judged, required, at, spans.held, everywhere),
        optimism=optimism_of(view, there, float(window.setpoint["probability"]), everywhere),
        draws=draws,
        seed=seed,
    )


def corners_of(view: Assessment, setpoint: Condition) -> tuple[Corner, ...]:
    """The corners of a set point's tolerance, the worst by what the study is judged by first."""
    kept = [f for f in view.study.definition.factors if f.kept_within is not None]
    if not kept:
        return ()
    rows = [{**setpoint, **dict(moved)} for moved in product(*(_ends(f, setpoint) for f in kept))]
    frame = pd.DataFrame(rows)[[*view.study.definition.factor_names]]
    p_well, p_mean = view.judged(frame, "well"), view.judged(frame, "mean")
    order = np.argsort(p_mean if view.study.definition.judged_by == "mean" else p_well)
    return tuple(
        Corner(
            condition=condition_of(frame.iloc[[i]]),
            p_well=float(p_well[i]),
            p_mean=float(p_mean[i]),
        )
        for i in order
    )


def _ends(factor: Factor, setpoint: Condition) -> list[tuple[str, float]]:
    x = float(np.asarray(setpoint[factor.name], dtype=float))
    width = 0.0 if factor.kept_within is None else float(factor.kept_within.at(x))
    return [(factor.name, round(x + sign * width, 10)) for sign in (-1.0, 1.0)]


def _anchors(steps: Steps, spans: Spans, at: Index) -> pd.DataFrame:
    """Conditions at which surfaces are drawn: over the whole range, and closer in the spans."""
    from scipy.stats.qmc import Sobol

    if not len(at):
        return steps.frame(at[None])
    unit = Sobol(len(at), rng=np.random.default_rng(0)).random_base2(int(np.log2(_ANCHORS)))
    parts = [at[None], (unit * steps.counts).astype(np.intp)]
    for span in (spans.held, spans.larger):
        if span is not None:
            parts.append(span.low + (unit * (span.high - span.low + 1)).astype(np.intp))
    return steps.frame(np.unique(np.concatenate(parts), axis=0))


def _boxes(
    judged: Judged, everywhere: Everywhere, span: Span | None, at: Index | None, asked: float
) -> tuple[Box | None, Box | None]:
    """A span as a box, and the largest part of it that is as sure at once as is asked."""
    if span is None:
        return None, None
    levels = asked_levels(span, at)
    ok, mean = holding_everywhere(everywhere, judged.steps, levels)
    box = _box(judged, span, ok, mean)
    part = assured_span(ok, judged.steps, levels, asked, at)
    if part is None:
        return box, None
    for axis, n in enumerate(levels):
        inner = np.flatnonzero((n >= part.low[axis]) & (n <= part.high[axis]))
        ok, mean = np.take(ok, inner, axis + 1), np.take(mean, inner, axis + 1)
    return box, _box(judged, part, ok, mean)


def _box(judged: Judged, span: Span, ok: Bools, mean: Bools) -> Box:
    index, p = judged.within(span.low, span.high)
    worst = int(np.argmin(p))
    return Box(
        ranges=ranges_of(judged.steps, span),
        least=float(p[worst]),
        least_at=judged.steps.condition(index[worst]),
        assurance=assurance_of(ok),
        mean_everywhere=assurance_of(mean),
        share=share_of(judged.steps, span),
        conditions=len(p),
        every=len(p) == span.size,
    )
