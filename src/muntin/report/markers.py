"""Markers of wells run, wells proposed and the set point; all read without colour."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.report.style import ACCENT, INK, PAPER, QUIET, halo
from muntin.report.words import chance_text
from muntin.window.window import Window

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_ONE_ROW = 5
# Letters that a row of a legend takes, and what a handle takes of them.
_ROW, _HANDLE = 112, 8
_RUN: dict[str, dict[str, Any]] = {
    "passed": {"marker": "o", "markerfacecolor": INK},
    "failed": {"marker": "o", "markerfacecolor": PAPER},
    "between": {"marker": "o", "markerfacecolor": INK, "fillstyle": "left"},
    "awaited": {"marker": "x"},
    "tracked": {"marker": "o", "markerfacecolor": QUIET},
}


def mark_run(axes: Axes, table: pd.DataFrame, x: str, y: str) -> None:
    """Mark conditions that were run: filled passed, open failed, half filled between; whole ones
    beyond the border too, where a well measured up to a step outside the range.
    """
    for verdict, look in _RUN.items():
        here = table[table["verdict"] == verdict]
        if len(here):
            axes.plot(
                here[x],
                here[y],
                linestyle="none",
                markersize=7,
                markeredgecolor=INK,
                markerfacecoloralt=PAPER,
                markeredgewidth=1.1,
                path_effects=halo(3.0),
                label="run" if verdict == "tracked" else f"run, {verdict}",
                clip_on=False,
                zorder=4,
                **look,
            )


def mark_proposed(axes: Axes, table: pd.DataFrame, x: str, y: str) -> None:
    """Mark conditions of the next plate by diamonds, those that only tie plates by squares, each
    with the number of its wells where it has several; whole ones at the border of the range too.
    """
    for bridging, marker, label in ((False, "D", "proposed"), (True, "s", "proposed, bridging")):
        here = table[table["bridging"] == bridging]
        if len(here):
            axes.plot(
                here[x],
                here[y],
                linestyle="none",
                marker=marker,
                markersize=11 if bridging else 9,
                markerfacecolor="none",
                markeredgecolor=ACCENT,
                markeredgewidth=1.8,
                path_effects=halo(3.4),
                label=label,
                clip_on=False,
                zorder=5,
            )
    for row in table[table["wells"] > 1].to_dict("records"):
        axes.annotate(
            f"×{row['wells']}",
            (row[x], row[y]),
            xytext=(7, -1),
            textcoords="offset points",
            va="center",
            fontsize=7.5,
            color=INK,
            path_effects=halo(2.4),
            annotation_clip=False,
            zorder=6,
        )


def mark_set_point(axes: Axes, window: Window, x: float, y: float) -> None:
    """Mark the set point, or the best condition so far where none is inside, by a star."""
    axes.plot(
        [x],
        [y],
        linestyle="none",
        marker="*",
        markersize=17,
        markerfacecolor=PAPER,
        markeredgecolor=INK,
        markeredgewidth=1.2,
        label="set point" if window.share else "best so far",
        clip_on=False,
        zorder=7,
    )


def mark_edge(axes: Axes, edge: pd.DataFrame, x: str, y: str) -> None:
    """Draw the interval of the edge at each of its conditions, along the factor that is moved; an
    end that lies outside the range is left open at the edge itself.
    """
    label: str | None = "edge, 95 %"
    for row in edge.to_dict("records"):
        moved = str(row["factor"])
        if moved not in (x, y):
            continue
        here = float(row[moved])
        ends = [here if pd.isna(row[end]) else float(row[end]) for end in ("low", "high")]
        still = [float(row[y if moved == x else x])] * 2
        across, up = (ends, still) if moved == x else (still, ends)
        axes.plot(
            across,
            up,
            color=INK,
            linewidth=1.1,
            marker="|" if moved == x else "_",
            markersize=7,
            markeredgewidth=1.1,
            label=label,
            zorder=3,
        )
        label = None


def required_line(axes: Axes, required: float) -> None:
    """Draw the required probability across a panel whose y axis is probability.

    It is named beside the panel, where no curve or marker can hide it.
    """
    axes.axhline(required, color=INK, linewidth=1, linestyle=(0, (4, 3)), zorder=1)
    axes.annotate(
        f"required\n{chance_text(required)}",
        (1.0, required),
        xycoords=("axes fraction", "data"),
        xytext=(7, 0),
        textcoords="offset points",
        va="center",
        fontsize=8,
        color=INK,
    )


def figure_legend(figure: Figure, every: Iterable[Axes]) -> None:
    """Put one legend below the panels, each marker once."""
    found: dict[str, Any] = {}
    for axes in every:
        for handle, label in zip(*axes.get_legend_handles_labels(), strict=True):
            found.setdefault(label, handle)
    if found:
        figure.legend(
            found.values(),
            found.keys(),
            loc="outside lower left",
            ncols=_columns([*found]),
            frameon=False,
            fontsize=9,
            labelcolor=INK,
        )


def _columns(labels: list[str]) -> int:
    """Return how many columns of a legend, which is filled column by column, fit below a figure."""
    for columns in range(len(labels) if len(labels) <= _ONE_ROW else 4, 1, -1):
        rows = -(-len(labels) // columns)
        widths = [
            _HANDLE + max(map(len, labels[i : i + rows])) for i in range(0, len(labels), rows)
        ]
        if sum(widths) <= _ROW:
            return columns
    return 1
