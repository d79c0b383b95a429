"""Plates beside each other: conditions that several of them read, and the errors of each."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from muntin.record.responses import Response
from muntin.report.canvas import blank, finish, one_panel
from muntin.report.markers import figure_legend
from muntin.report.sections import response_named
from muntin.report.style import BAND, INK, LINE, QUIET, SERIES, dress, plain_ticks
from muntin.report.words import axis_label, condition_text
from muntin.window.assessment import Assessment
from muntin.window.group_errors import group_errors

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_MOST, _MOST_GROUPS = 6, 24


def repeated(view: Assessment, response: Response) -> pd.DataFrame:
    """Return the readings of conditions that several plates read, a row a reading.

    Columns: number (of the condition, most plates first), condition (in words, by its targets),
    plate, well and y in the user's unit. Censored readings are left out.
    """
    definition, names = view.study.definition, list(view.study.definition.factor_names)
    readings = view.study.readings(response.name)
    readings = readings[readings["censored"] == 0]
    targets = readings[[f"{n}_target" for n in names]].set_axis(names, axis=1)
    group = targets.groupby(names, sort=False).ngroup()
    plates = readings.groupby(group)["plate"].nunique()
    several = plates[plates > 1].sort_values(ascending=False, kind="stable").index
    rows = []
    for number, one in enumerate(several):
        here = readings[group == one]
        told = condition_text(definition, targets[group == one].iloc[0].to_dict())
        y = here["y"] * response.unit_size
        rows.append(here[["plate", "well"]].assign(y=y, condition=told, number=number))
    columns = ["number", "condition", "plate", "well", "y"]
    return pd.concat(rows, ignore_index=True)[columns] if rows else pd.DataFrame(columns=columns)


def controls(view: Assessment, response: str | None = None, axes: Axes | None = None) -> Axes:
    """Draw the readings of conditions that several plates read, plate by plate, a line each.

    At most six conditions, those that most plates read. Raises ValueError where no condition was
    read on two plates.
    """
    read = response_named(view, response)
    table = repeated(view, read)
    if table.empty:
        raise ValueError("no condition has been read on two plates: bridging wells would tell")
    axes, new = one_panel(axes, f"{read.label}: conditions that several plates read")
    _controls(axes, view, read, table)
    return finish(axes, new)


def errors(view: Assessment, response: str | None = None, axes: Axes | None = None) -> Axes:
    """Draw the errors that wells share, one row a plate, bottle or day, with 95 % intervals, and
    the range in which the error of one to come is expected.

    At most 24 rows, those with most readings. Raises ValueError where the response has none.
    """
    read = response_named(view, response)
    table = group_errors(view, read)
    if table.empty:
        raise ValueError(f"the study names no shared error that touches {read.label}")
    axes, new = one_panel(axes, f"{read.label}: errors that wells share")
    _errors(axes, table)
    return finish(axes, new)


def plates_figure(view: Assessment, response: Response) -> Figure | None:
    """Return both panels of one response, or the one there is something for, or None."""
    again, shared = repeated(view, response), group_errors(view, response)
    panels = [not again.empty, not shared.empty]
    if not any(panels):
        return None
    title = f"{response.label}: plates beside each other"
    figure, every = blank(title, columns=sum(panels))
    if not again.empty:
        _controls(every[0], view, response, again)
    if not shared.empty:
        _errors(every[-1], shared)
    figure_legend(figure, every)
    return figure


def _controls(axes: Axes, view: Assessment, response: Response, table: pd.DataFrame) -> None:
    plates = [p.name for p in view.study.plates if not p.void]
    number = {plate: i for i, plate in enumerate(plates)}
    for one in range(min(_MOST, int(table["number"].max()) + 1)):
        here = table[table["number"] == one]
        colour, dash = SERIES[one]
        at = here["plate"].map(number)
        means = here.groupby(at)["y"].mean()
        label = here["condition"].iloc[0]
        axes.plot(
            means.index, means, color=colour, linestyle=dash, linewidth=1.6, label=label, zorder=2
        )
        axes.plot(at, here["y"], "o", color=colour, markersize=6, zorder=3)
    for limit in (response.at_least, response.at_most):
        if limit is not None:
            axes.axhline(limit, color=INK, linewidth=1, linestyle=(0, (4, 3)), label="target")
    if response.kind == "positive":
        axes.set_yscale("log")
        plain_ticks(axes.yaxis)
    axes.set_xticks(range(len(plates)), plates)
    if len(plates) > 4:
        axes.tick_params(axis="x", labelrotation=35)
    axes.set(
        xlim=(-0.4, len(plates) - 0.6),
        ylabel=axis_label(response.label, response.unit),
        xlabel="Plate",
    )
    dress(axes)


def _errors(axes: Axes, table: pd.DataFrame) -> None:
    shown = table.nlargest(_MOST_GROUPS, "readings", keep="first").sort_index()
    rows = -np.arange(len(shown), dtype=float)
    several = shown["unit"].nunique() > 1 or shown["by"].nunique() > 1
    for (by, unit), part in shown.groupby(["by", "unit"], sort=False):
        at = rows[shown.index.get_indexer(part.index)]
        ends = part["size_low"].iloc[0], part["size_high"].iloc[0]
        axes.fill_betweenx(
            [at.min() - 0.45, at.max() + 0.45],
            np.full(2, ends[0]),
            np.full(2, ends[1]),
            color=BAND,
            linewidth=0,
            label="expected of one to come, 95 %",
            zorder=0,
        )
        axes.hlines(at, part["low"], part["high"], color=LINE, linewidth=2, zorder=2)
        axes.plot(part["error"], at, "o", color=LINE, markersize=7, label="error, 95 %", zorder=3)
        if several:
            text = f"by {by} ({unit})"
            axes.text(ends[1], at.max() + 0.47, text, ha="right", fontsize=8.5, color=INK)
    axes.axvline(0.0, color=QUIET, linewidth=1, zorder=1)
    units = shown["unit"].unique()
    axes.set_xlabel(axis_label("Error", units[0]) if len(units) == 1 else "Error")
    axes.set_yticks(rows, [*shown["group"]])
    axes.set_ylim(-len(shown) + 0.4, 0.75 if several else 0.6)
    dress(axes)
    if len(shown) > 12:
        axes.tick_params(axis="y", labelsize=7.5)
