"""The map: judged probability over two factors, with wells run and wells proposed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.report.canvas import blank
from muntin.report.markers import figure_legend, mark_edge, mark_proposed, mark_run, mark_set_point
from muntin.report.style import (
    BARRED,
    INK,
    QUIET,
    dress,
    factor_axis,
    halo,
    probability_colours,
)
from muntin.report.words import chance_text
from muntin.window.window import Window

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.contour import QuadContourSet
    from matplotlib.figure import Figure

Array = NDArray[np.float64]
_MOST_CHOICES = 4


def map_factors(definition: Definition) -> tuple[Factor, Factor, Factor | None] | None:
    """Return the factors of a map: x, y and the choices to have a panel each, if a map fits."""
    ranged = [factor for factor in definition.factors if factor.continuous]
    others = [factor for factor in definition.factors if not factor.continuous]
    few = all(len(factor.choices or ()) <= _MOST_CHOICES for factor in others)
    if len(ranged) != 2 or len(others) > 1 or not few:
        return None
    return ranged[0], ranged[1], others[0] if others else None


def draw_map(
    definition: Definition,
    window: Window | None,
    run: pd.DataFrame,
    proposed: pd.DataFrame,
    titles: tuple[str, str],
    height: float | None = None,
    edge: pd.DataFrame | None = None,
) -> Figure:
    """Draw one panel a choice. `run` and `proposed` have a row a condition, factors in columns.
    height: of the figure, in inches; what suits the panels where None. edge: conditions on the
    edge with its interval (`HandOver.edge`), drawn where given.

    Without a window there is no probability to show, only the plan. Raises ValueError where the
    study does not have two factors with a range and at most one with few choices.
    """
    factors = map_factors(definition)
    if factors is None:
        raise ValueError("a map needs two factors with a range, and at most one with few choices")
    x, y, panel = factors
    choices: list[str | None] = [None] if panel is None else list(panel.choices or ())
    columns = min(2, len(choices)) if len(choices) != 3 else 3
    rows = -(-len(choices) // columns)
    if height is None:
        height = 6.2 if columns == 1 else 0.9 + rows * (8.0 / columns + 0.6)
    figure, panels = blank(*titles, height, rows=rows, columns=columns, shared=True)
    shade = None
    for axes, choice in zip(panels, choices, strict=True):
        held = {} if panel is None else {panel.name: choice}
        on_edge = None if edge is None else _of(edge, held)
        tables = Conditions(_of(run, held), _of(proposed, held), on_edge)
        shade = map_panel(axes, definition, window, tables, (x, y), held, columns > 2) or shade
        axes.label_outer()
        if panel is not None:
            axes.set_title(panel.named(str(choice)), loc="left", fontsize=10, color=INK)
        elif window is not None:
            _name_edge(axes, definition.required_probability)
    if shade is not None:
        colour_bar(figure, shade, panels, definition)
    figure_legend(figure, panels)
    return figure


@dataclass(frozen=True)
class Conditions:
    """What a panel marks: conditions that were run, with their verdict, those of a plan, and those
    on the edge with its interval (`HandOver.edge`), or None.
    """

    run: pd.DataFrame
    proposed: pd.DataFrame
    edge: pd.DataFrame | None = None


def map_panel(
    axes: Axes,
    definition: Definition,
    window: Window | None,
    marked: Conditions,
    factors: tuple[Factor, Factor],
    held: Mapping[str, Any],
    narrow: bool = False,
) -> QuadContourSet | None:
    """Draw probability over two factors, the others held; return the shades, if there are any."""
    x, y = factors
    for factor, which in ((x, "x"), (y, "y")):
        factor_axis(axes, factor, which, 0.06 if narrow else 0.03)
    dress(axes)
    shade = None
    if window is not None:
        shade = _shade(axes, definition, _of(window.grid, held), x, y)
        set_point = window.setpoint
        if all(set_point[name] == value for name, value in held.items()):
            _box(axes, window, x, y)
            mark_set_point(axes, window, float(set_point[x.name]), float(set_point[y.name]))
        if marked.edge is not None:
            mark_edge(axes, marked.edge, x.name, y.name)
    mark_run(axes, marked.run, x.name, y.name)
    mark_proposed(axes, marked.proposed, x.name, y.name)
    return shade


def _of(table: pd.DataFrame, held: Mapping[str, Any]) -> pd.DataFrame:
    """Return the rows at the values that are held."""
    for name, value in held.items():
        table = table[table[name] == value]
    return table


def _shade(
    axes: Axes, definition: Definition, grid: pd.DataFrame, x: Factor, y: Factor
) -> QuadContourSet | None:
    """Shade probability in tenths and draw the edge; what limits forbid is hatched."""
    table = grid.pivot(index=y.name, columns=x.name, values="probability")
    if min(table.shape) < 2:
        return None
    across, up = table.columns.to_numpy(dtype=float), table.index.to_numpy(dtype=float)
    p = np.ma.masked_invalid(table.to_numpy(dtype=float))
    if p.mask.any():
        _bar(axes, across, up)
    shade = axes.contourf(
        across, up, p, levels=np.linspace(0, 1, 11), cmap=probability_colours(), zorder=1
    )
    required = definition.required_probability
    if p.min() < required < p.max():
        axes.contour(across, up, p, levels=[required], colors=INK, linewidths=1.8, zorder=2)
        axes.plot([], [], color=INK, linewidth=1.8, label=f"edge, {chance_text(required)}")
    return shade


def _name_edge(axes: Axes, required: float) -> None:
    """Write the required probability on the edge, where it lies farthest from markers and ends."""
    to_panel = axes.transData + axes.transAxes.inverted()
    contours = axes.collections[1:]
    edge = [to_panel.transform(path.vertices) for c in contours for path in c.get_paths()]
    if not edge:
        return
    points = np.concatenate(edge)
    marks = np.concatenate(
        [[[-9.0, -9.0]], *(to_panel.transform(line.get_xydata()) for line in axes.get_lines())]
    )
    apart = np.linalg.norm(points[:, None] - marks, axis=2).min(axis=1)
    room = np.minimum(apart, 2.0 * np.minimum(points, 1.0 - points).min(axis=1))
    x, y = points[np.argmax(room)]
    axes.text(
        x,
        y,
        chance_text(required),
        transform=axes.transAxes,
        ha="center",
        va="center",
        fontsize=9,
        color=INK,
        path_effects=halo(3.0),
        zorder=8,
    )


def _bar(axes: Axes, across: Array, up: Array) -> None:
    """Hatch the range; probability covers it again where conditions are allowed."""
    from matplotlib.patches import Rectangle

    barred = Rectangle(
        (across[0], up[0]),
        float(np.ptp(across)),
        float(np.ptp(up)),
        facecolor=BARRED,
        edgecolor="#cfcac0",
        hatch="////",
        linewidth=0,
        label="not allowed",
        zorder=0,
    )
    axes.add_patch(barred)


def _box(axes: Axes, window: Window, x: Factor, y: Factor) -> None:
    """Outline the ranges that hold together."""
    if window.ranges is None:
        return
    from matplotlib.patches import Rectangle

    ends = [np.asarray(window.ranges[f.name], dtype=float) for f in (x, y)]
    (left, right), (low, high) = ends
    axes.add_patch(
        Rectangle(
            (left, low),
            right - left,
            high - low,
            fill=False,
            edgecolor=INK,
            linewidth=1.1,
            linestyle=(0, (5, 3)),
            label="ranges that hold together",
            zorder=3,
        )
    )


def colour_bar(
    figure: Figure, shade: QuadContourSet, every: Sequence[Axes], definition: Definition
) -> None:
    """Put the scale of the shades beside the panels, with the required probability on it."""
    says = {
        "mean": "Probability that the process mean passes",
        "well": "Probability that a new well passes",
        "kept": "Probability that a new well passes,\nfactors kept within ±",
    }
    bar = figure.colorbar(shade, ax=list(every), pad=0.02, shrink=0.9, aspect=30)
    bar.set_label(says[definition.judged_by], color=INK, fontsize=9)
    bar.ax.axhline(definition.required_probability, color=INK, linewidth=1.8)
    bar.ax.tick_params(labelsize=9, colors=QUIET, labelcolor=INK)
    bar.outline.set_edgecolor(QUIET)
