"""Plates beside each other: conditions that several of them read, and the errors of each."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

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

_MOST, _MOST_GROUPS, _CROWDED = 6, 24, 10
_HEAD: dict[str, Any] = {"loc": "left", "fontsize": 9, "color": INK}


def repeated(view: Assessment, response: Response) -> pd.DataFrame:
    """Return the readings of conditions that several plates read, a row a reading.

    Columns: number (of the condition, most plates and wells first), condition (in words, targets),
    plate, well and y in the user's unit. Censored readings are left out.
    """
    definition, names = view.study.definition, list(view.study.definition.factor_names)
    readings = view.study.readings(response.name)
    readings = readings[readings["censored"] == 0]
    targets = readings[[f"{n}_target" for n in names]].set_axis(names, axis=1)
    group = targets.groupby(names, sort=False).ngroup()
    counts = readings.groupby(group)["plate"].agg(["nunique", "size"])
    counts = counts[counts["nunique"] > 1]
    several = counts.sort_values(["nunique", "size"], ascending=False, kind="stable").index
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


def errors(
    view: Assessment,
    response: str | None = None,
    by: str | None = None,
    axes: Axes | None = None,
) -> Axes:
    """Draw the errors that wells share, one row a plate, bottle or day, with 95 % intervals, and
    the range in which the error of one to come is expected.

    by: which of several shared errors, such as "plate and salt"; the first where None. At most 24
    rows, those with most readings. Raises ValueError where the response has none, or not that one.
    """
    read = response_named(view, response)
    every = {str(name): part for name, part in group_errors(view, read).groupby("by", sort=False)}
    if not every:
        raise ValueError(f"the study names no shared error that touches {read.label}")
    if by is not None and by not in every:
        raise ValueError(f"{by!r} is no shared error of {read.label}; there are {', '.join(every)}")
    table = every[by] if by is not None else next(iter(every.values()))
    axes, new = one_panel(axes, f"{read.label}: errors that wells share", _shared_by(table))
    _errors(axes, table)
    return finish(axes, new)


def plates_figure(view: Assessment, response: Response) -> Figure | None:
    """Return the panels of one response that there is something for: conditions that several
    plates read, and each error that several groups have; None where there is nothing.
    """
    again = repeated(view, response)
    every = [part for _, part in group_errors(view, response).groupby("by", sort=False)]
    shared = [part for part in every if len(part) > 1]
    if again.empty and not shared:
        return None
    title = f"{response.label}: plates beside each other"
    figure, panels = blank(title, columns=len(shared) + (not again.empty))
    if not again.empty:
        _controls(panels[0], view, response, again)
        panels[0].set_title("conditions read on several plates", **_HEAD)
    for axes, table in zip(panels[len(panels) - len(shared) :], shared, strict=True):
        _errors(axes, table)
        axes.set_title(_shared_by(table), **_HEAD)
    figure_legend(figure, panels)
    return figure


def _shared_by(table: pd.DataFrame) -> str:
    return f"errors shared by {table['by'].iloc[0]}"


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
    first = shown.iloc[0]
    rows = -np.arange(len(shown), dtype=float)
    expected = "expected of one to come, 95 %"
    axes.axvspan(first["size_low"], first["size_high"], color=BAND, label=expected, zorder=0)
    axes.hlines(rows, shown["low"], shown["high"], color=LINE, linewidth=2, zorder=2)
    axes.plot(shown["error"], rows, "o", color=LINE, markersize=6, label="error, 95 %", zorder=3)
    axes.axvline(0.0, color=QUIET, linewidth=1, zorder=1)
    axes.set_xlabel(axis_label("Error", str(first["unit"])))
    axes.set_yticks(rows, [*shown["group"]])
    axes.set_ylim(-len(shown) + 0.4, 0.6)
    dress(axes)
    if len(shown) > _CROWDED:
        axes.tick_params(axis="y", labelsize=7)
