"""One factor: the probability, and each response's mean with its interval and readings."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from muntin.record.factors import Factor
from muntin.record.responses import Response
from muntin.report.markers import (
    figure_legend,
    mark_proposed,
    mark_run,
    mark_set_point,
    required_line,
)
from muntin.report.slices import few_levels
from muntin.report.style import BAND, INK, LINE, QUIET, dress, factor_axis, new_figure, plain_ticks
from muntin.report.verdicts import meets
from muntin.report.words import axis_label
from muntin.window.assessment import Assessment
from muntin.window.window import Window

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure


def draw_line(
    view: Assessment, window: Window | None, proposed: pd.DataFrame, titles: tuple[str, str]
) -> Figure:
    """Draw a study of one factor with a range; `proposed` has a row a condition to run.

    Without a window the panel of the probability is left out. Raises ValueError where there is
    neither a window nor a response with readings.
    """
    definition = view.study.definition
    factor = definition.factors[0]
    shown = [r for r in definition.responses if r.name in view.stacks]
    panels = len(shown) + (window is not None)
    if not panels:
        raise ValueError("nothing to draw: no window and no readings")
    figure = new_figure(1.2 + 2.7 * panels, *titles)
    every = figure.subplots(panels, 1, sharex=True, squeeze=False)[:, 0]
    if window is not None:
        _probability(every[0], factor, window, proposed, definition.required_probability)
    conditions = pd.DataFrame({factor.name: few_levels(factor)})
    at = view.at(conditions)
    for axes, response in zip(every[panels - len(shown) :], shown, strict=True):
        _response(axes, view, response, conditions[factor.name], at)
    for axes in every:
        dress(axes)
    factor_axis(every[-1], factor, "x")
    figure_legend(figure, every)
    return figure


def _probability(
    axes: Axes, factor: Factor, window: Window, proposed: pd.DataFrame, required: float
) -> None:
    grid = window.grid
    required_line(axes, required)
    axes.plot(grid[factor.name], grid["probability"], color=LINE, linewidth=2.2)
    mark_proposed(axes, proposed.assign(height=1.06), factor.name, "height")
    set_point = window.setpoint
    mark_set_point(axes, window, float(set_point[factor.name]), float(set_point["probability"]))
    axes.set(ylim=(-0.03, 1.14), yticks=np.linspace(0, 1, 6), ylabel="Probability")


def _response(
    axes: Axes, view: Assessment, response: Response, levels: pd.Series, at: pd.DataFrame
) -> None:
    name, factor = response.name, view.study.definition.factors[0]
    axes.fill_between(
        levels, at[f"{name}_low"], at[f"{name}_high"], color=BAND, label="mean, 95 % interval"
    )
    axes.plot(levels, at[f"{name}_mean"], color=LINE, linewidth=2.2)
    readings = view.study.readings(name)
    values = readings["y"].to_numpy(dtype=float) * response.unit_size
    verdict = np.where(meets(response, values), "passed", "failed")
    if not response.judged:
        verdict = np.full(len(values), "tracked")
    table = pd.DataFrame({factor.name: readings[factor.name], "y": values, "verdict": verdict})
    mark_run(axes, table, factor.name, "y")
    for target in (response.at_least, response.at_most):
        if target is not None:
            axes.axhline(target, color=QUIET, linewidth=1, linestyle=(0, (1, 2)))
    if response.kind == "positive":
        axes.set_yscale("log")
        plain_ticks(axes.yaxis)
    axes.set_ylabel(axis_label(response.label, response.unit), color=INK)
