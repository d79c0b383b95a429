"""The predicted operating window (plate scale)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.window.boxes import largest_span, ranges_of
from muntin.window.limiting import Side
from muntin.window.notebook import window_card, window_line
from muntin.window.steps import Judged, Steps, condition_of

Array = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True, eq=False)
class Window:
    """Where the judged probability reaches the required one.

    grid: conditions (raw units) with p_mean, probability (the judged one) and inside. regular:
    whether they form a grid. share: of the range inside. wrong_share: expected share of the range
    that is called wrongly, mean of min(p, 1 - p) of p_mean. setpoint: the condition of highest
    probability, with it. ranges: the largest factor ranges that hold the set point and have all
    conditions of the grid in them inside; None without a grid or a window. What lies between the
    nodes of a grid that leaves bench steps out, `Assessment.handover` judges. unsupported: reasons
    why the data do not support the window; empty if none. sides: which response gives way first
    beyond each side of the ranges.
    """

    grid: pd.DataFrame
    regular: bool
    share: float
    wrong_share: float
    setpoint: pd.Series
    ranges: dict[str, tuple[object, object]] | None
    unsupported: tuple[str, ...]
    sides: tuple[Side, ...] = ()

    def __repr__(self) -> str:
        return window_line(self)

    def _repr_html_(self) -> str:
        return window_card(self)


def judge_window(
    definition: Definition,
    grid: pd.DataFrame,
    regular: bool,
    p_mean: Array,
    judged: Array,
    unsupported: tuple[str, ...],
) -> Window:
    """The window from probabilities (n,) at the conditions of a grid."""
    inside = judged >= definition.required_probability
    table = grid.assign(p_mean=p_mean, probability=judged, inside=inside)
    best = _best(definition, grid, np.where(inside, judged, -1.0) if inside.any() else judged)
    ranges = None
    if regular and inside[best]:
        ranges = _ranges(definition, table, best)
    return Window(
        grid=table,
        regular=regular,
        share=float(inside.mean()),
        wrong_share=float(np.minimum(p_mean, 1.0 - p_mean).mean()),
        setpoint=table[[*definition.factor_names, "probability"]].iloc[best],
        ranges=ranges,
        unsupported=unsupported,
    )


def _best(definition: Definition, grid: pd.DataFrame, judged: Array) -> int:
    """Row of the highest probability; among rows that tie to half a per cent, which no model can
    tell apart, the most central of them.
    """
    tied = np.flatnonzero(judged >= judged.max() - 5e-3)
    numeric = [f.name for f in definition.factors if f.continuous]
    if not numeric:
        return int(tied[np.argmax(judged[tied])])
    values = grid.loc[tied, numeric].to_numpy(dtype=float)
    spans = np.array([f.span[1] - f.span[0] for f in definition.factors if f.continuous])
    away = ((values - values.mean(axis=0)) / spans) ** 2
    return int(tied[np.argmin(away.sum(axis=1))])


def _ranges(
    definition: Definition, table: pd.DataFrame, best: int
) -> dict[str, tuple[object, object]] | None:
    """The largest box that holds row `best` and in which every condition of the grid is inside; the
    choices of that row are held.
    """
    condition = condition_of(table[[*definition.factor_names]].iloc[[best]])
    judged = Judged(Steps.at(definition, condition), _not_asked)
    judged.learn(table)
    at = judged.steps.index(table.iloc[[best]])[0]
    nodes = judged.nodes()
    span = largest_span(judged, definition.required_probability, nodes, at)
    return None if span is None else ranges_of(judged.steps, span)


def _not_asked(frame: pd.DataFrame) -> Array:
    raise ValueError(f"{len(frame)} conditions off the grid")
