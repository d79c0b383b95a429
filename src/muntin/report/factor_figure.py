"""One factor: the process mean of each response with its interval, new wells, and the target."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from muntin.record.factors import Factor
from muntin.record.responses import Response
from muntin.report.canvas import blank, finish, one_panel
from muntin.report.markers import figure_legend
from muntin.report.sections import (
    best_word,
    factor_named,
    held_line,
    place,
    response_named,
    section,
    wells_near,
)
from muntin.report.style import (
    INK,
    LINE,
    PAPER,
    QUIET,
    SLIDE,
    dress,
    factor_axis,
    plain_ticks,
)
from muntin.report.words import axis_label
from muntin.window.assessment import Assessment

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

# Bands of new wells and of the process mean, the second on top of the first.
_NEW, _MEAN = "#d6e5ed", "#94bbd2"
_TARGET: dict[str, Any] = {
    "color": INK,
    "linewidth": 1.3,
    "linestyle": (0, (4, 3)),
    "zorder": 2,
}


def factor(
    view: Assessment, name: str | None = None, response: str | None = None, axes: Axes | None = None
) -> Axes:
    """Draw one response along one factor, the others held at the set point.

    Shown are the process mean with its central 95 %, the central 95 % of new wells, the target, the
    set point and the wells that were run on this line. name: of the factor, the first where None.
    response: one that has been read, the first judged one where None. Raises ValueError for others.
    """
    along, read = factor_named(view, name), response_named(view, response)
    axes, new = one_panel(axes, f"{read.label} along {along.label}", held_line(view, along))
    response_panel(axes, view, read, along, section(view, along))
    name_axis(axes, along)
    return finish(axes, new)


def factor_figure(view: Assessment, along: Factor) -> Figure:
    """Return the figure of one factor: a panel for every response that has been read."""
    read = [r for r in view.study.definition.responses if r.name in view.stacks]
    columns = min(3, len(read))
    rows = -(-len(read) // columns)
    height = SLIDE if rows == 1 else 1.3 + 2.6 * rows
    says = held_line(view, along)
    title = f"Responses along {along.label}" if len(read) > 1 else f"{read[0].label} along "
    title = title if len(read) > 1 else title + along.label
    figure, panels = blank(title, says, height, rows=rows, columns=columns)
    table = section(view, along)
    for axes, one in zip(panels, read, strict=False):
        response_panel(axes, view, one, along, table)
        name_axis(axes, along)
    for spare in panels[len(read) :]:
        spare.remove()
    figure_legend(figure, panels[: len(read)])
    return figure


def response_panel(
    axes: Axes, view: Assessment, response: Response, along: Factor, table: pd.DataFrame
) -> None:
    """Draw a response over a `section` table."""
    r, at = response.name, place(along, table[along.name])
    low, mean, high = (table[f"{r}_{name}"] for name in ("low", "mean", "high"))
    least, most = (table[f"{r}_{name}"] for name in ("new_low", "new_high"))
    if along.continuous:
        axes.fill_between(at, least, most, color=_NEW, linewidth=0, label="new wells, 95 %")
        axes.fill_between(at, low, high, color=_MEAN, linewidth=0, label="mean, 95 %")
        axes.plot(at, mean, color=LINE, linewidth=2.2, label="process mean", zorder=3)
    else:
        axes.vlines(at, least, most, color=_MEAN, linewidth=7, label="new wells, 95 %")
        axes.vlines(at, low, high, color=LINE, linewidth=2, label="mean, 95 %")
        axes.plot(at, mean, "o", color=LINE, markersize=7, label="process mean", zorder=3)
    _targets(axes, response)
    _wells(axes, wells_near(view, response, along), along)
    set_point_line(axes, view, along)
    if response.kind == "positive":
        axes.set_yscale("log")
        plain_ticks(axes.yaxis)
    axes.set_ylabel(axis_label(response.label, response.unit))
    dress(axes)


def name_axis(axes: Axes, along: Factor) -> None:
    """Label the x axis by a factor, one tick a choice where it has choices."""
    if along.continuous:
        factor_axis(axes, along, "x", 0.02)
        return
    choices = list(along.choices or ())
    axes.set_xticks(range(len(choices)), choices)
    axes.set(xlabel=along.label, xlim=(-0.6, len(choices) - 0.4))


def set_point_line(axes: Axes, view: Assessment, along: Factor) -> None:
    """Mark where the set point, or the best condition so far, lies on the factor."""
    at = float(place(along, [view.window().setpoint[along.name]])[0])
    axes.axvline(
        at, color=INK, linewidth=1.1, linestyle=(0, (1, 2)), zorder=2, label=best_word(view)
    )


def _targets(axes: Axes, response: Response) -> None:
    """Draw the limits of the target; beyond them the response fails."""
    for limit in (response.at_least, response.at_most):
        if limit is not None:
            axes.axhline(limit, label="target", **_TARGET)


def _wells(axes: Axes, readings: pd.DataFrame, along: Factor) -> None:
    """Mark readings made on this line; triangles where only a limit was read."""
    for side, marker, label in ((0, "o", "wells run"), (-1, "v", "read below"), (1, "^", "above")):
        here = readings[readings["censored"] == side]
        if len(here):
            axes.plot(
                place(along, here[along.name]),
                np.asarray(here["y"], dtype=float),
                linestyle="none",
                marker=marker,
                markersize=5.5,
                markerfacecolor=QUIET if side == 0 else PAPER,
                markeredgecolor=PAPER if side == 0 else INK,
                markeredgewidth=0.8,
                label=label,
                zorder=4,
            )
