"""Panels of probability along one factor at a time, through the set point."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.factors import Factor
from muntin.report.markers import figure_legend, mark_set_point, required_line
from muntin.report.style import ACCENT, BARRED, INK, LINE, dress, factor_axis, new_figure
from muntin.report.words import setting_text
from muntin.window.assessment import Assessment
from muntin.window.window import Window

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_MOST_POINTS = 121


def draw_slices(
    view: Assessment,
    window: Window | None,
    run: pd.DataFrame,
    proposed: pd.DataFrame,
    titles: tuple[str, str],
) -> Figure:
    """Draw one panel a factor, the others held at the set point.

    `run` and `proposed` have a row a condition; their levels are marked along each factor.
    Without a window only the levels are shown.
    """
    factors = view.study.definition.factors
    columns = min(2, len(factors))
    rows = -(-len(factors) // columns)
    figure = new_figure(1.0 + (1.2 if window is None else 2.7) * rows, *titles)
    every = figure.subplots(rows, columns, squeeze=False)
    for axes in every.flat[len(factors) :]:
        axes.remove()
    for axes, factor in zip(every.flat, factors, strict=False):
        if window is not None:
            _probability(axes, view, factor, window)
            axes.set(ylim=(-0.16, 1.12), yticks=np.linspace(0, 1, 6), ylabel="Probability")
        else:
            axes.set(ylim=(-0.4, 1.4), yticks=[])
        _levels(axes, factor, run, proposed)
        dress(axes)
    figure_legend(figure, every.flat[: len(factors)])
    return figure


def few_levels(factor: Factor) -> NDArray[Any]:
    """Return the levels of a factor, spread evenly over its steps where there are very many."""
    levels: NDArray[Any] = factor.levels()
    if not factor.continuous or len(levels) <= _MOST_POINTS:
        return levels
    few: NDArray[Any] = levels[np.linspace(0, len(levels) - 1, _MOST_POINTS).round().astype(int)]
    return few


def along(view: Assessment, factor: Factor, set_point: pd.Series) -> pd.DataFrame:
    """Return levels of a factor, the others held at the set point, with probability.

    Probability is NaN where the study's limits forbid the condition.
    """
    definition = view.study.definition
    levels = few_levels(factor)
    held = {f.name: [set_point[f.name]] * len(levels) for f in definition.factors}
    frame = pd.DataFrame({**held, factor.name: levels})
    p = view.judged(frame, definition.judged_by)
    return frame.assign(probability=np.where(definition.allowed(frame), p, np.nan))


def _probability(axes: Axes, view: Assessment, factor: Factor, window: Window) -> None:
    definition, set_point = view.study.definition, window.setpoint
    table = along(view, factor, set_point)
    required_line(axes, definition.required_probability)
    at = set_point[factor.name]
    if factor.continuous:
        axes.plot(table[factor.name], table["probability"], color=LINE, linewidth=2.2)
        if factor.kept_within is not None:
            width = float(factor.kept_within.at(float(at)))
            axes.axvspan(at - width, at + width, color=BARRED, zorder=0, label="kept within ±")
        where = float(at)
    else:
        p = table["probability"].to_numpy(dtype=float)
        axes.bar(np.arange(len(p)), np.nan_to_num(p), width=0.6, color="#a5c6d9", edgecolor=LINE)
        where = float(list(factor.choices or ()).index(at))
    mark_set_point(axes, window, where, float(set_point["probability"]))
    axes.set_title(setting_text(factor, at), loc="left", fontsize=9.5, color=INK)


def _levels(axes: Axes, factor: Factor, run: pd.DataFrame, proposed: pd.DataFrame) -> None:
    """Mark the levels that were run below the panel, those proposed above it."""
    if factor.continuous:
        factor_axis(axes, factor, "x")
        done, planned = run[factor.name], proposed[factor.name]
    else:
        number = {choice: i for i, choice in enumerate(factor.choices or ())}
        axes.set_xticks(list(number.values()), list(number))
        axes.set_xlabel(factor.label)
        done, planned = run[factor.name].map(number), proposed[factor.name].map(number)
    for values, height, marker, colour, label in (
        (done, -0.09, "|", INK, "levels run"),
        (planned, 1.07, "D", ACCENT, "levels proposed"),
    ):
        levels = np.unique(values.to_numpy(dtype=float))
        if not len(levels):
            continue
        axes.plot(
            levels,
            np.full(len(levels), height),
            linestyle="none",
            marker=marker,
            markersize=9 if marker == "|" else 5,
            markeredgecolor=colour,
            markerfacecolor="none",
            label=label,
            clip_on=False,
        )
