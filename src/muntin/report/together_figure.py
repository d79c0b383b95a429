"""Responses together along one factor: their chances to pass, and each with its limits."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from muntin.record.factors import Factor
from muntin.record.responses import Response
from muntin.report.canvas import Panels, blank, given_panels
from muntin.report.factor_figure import name_axis, response_panel, set_point_line
from muntin.report.markers import figure_legend, required_line
from muntin.report.sections import factor_named, held_line, place, section
from muntin.report.style import INK, SERIES, dress
from muntin.window.assessment import Assessment

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_JUDGED = {
    "mean": "process mean",
    "well": "new wells",
    "kept": "new wells, factors\nkept within ±",
}


def together(
    view: Assessment, name: str | None = None, axes: Sequence[Axes] | None = None
) -> Panels:
    """Draw all responses along one factor, the others held at the set point.

    The first panel has the probability of each judged response alone and of all at once, the
    others have a response each, its limits drawn. name: of the factor; where None the one whose
    range the window leaves soonest. axes: as many as panels. Raises ValueError for another factor
    or number of axes, and where nothing was read.
    """
    along = factor_named(view, name) if name else tightest(view)
    read = [r for r in view.study.definition.responses if r.name in view.stacks]
    if not read:
        raise ValueError("nothing has been read yet")
    count = 1 + len(read)
    panels = _new(view, along, count) if axes is None else given_panels(axes, count)
    table = section(view, along)
    _chances(panels[0], view, along, table)
    for panel, response in zip(panels[1:], read, strict=True):
        response_panel(panel, view, response, along, table)
    for panel in panels:
        name_axis(panel, along)
    figure = panels[0].get_figure(root=True)
    if axes is None and figure is not None:
        figure_legend(figure, panels)
    return panels


def tightest(view: Assessment) -> Factor:
    """Return the factor with a range of which the window's ranges hold the smallest share, or the
    first factor where there are none.
    """
    factors = view.study.definition.factors
    ranges = view.window().ranges
    ranged = [f for f in factors if f.continuous]
    if ranges is None or not ranged:
        return (ranged or list(factors))[0]

    def share(factor: Factor) -> float:
        low, high, _ = factor.span
        ends = np.asarray([*ranges[factor.name], low, high], dtype=float)
        left, right, low, high = np.log(ends) if factor.scale == "log" else ends
        return float((right - left) / (high - low))

    return min(ranged, key=share)


def _new(view: Assessment, along: Factor, count: int) -> Panels:
    columns = count if count <= 3 else -(-count // 2)
    rows = -(-count // columns)
    figure, panels = blank(
        f"All responses along {along.label}",
        held_line(view, along),
        4.5 if rows == 1 else 5.2,
        rows=rows,
        columns=columns,
    )
    del figure
    for spare in panels[count:]:
        spare.remove()
    return Panels(panels[:count])


def _chances(axes: Axes, view: Assessment, along: Factor, table: pd.DataFrame) -> None:
    """Draw the chance that each judged response passes, and that all do at once."""
    definition, at = view.study.definition, place(along, table[along.name])
    judged = [r for r in definition.judged if r.name in view.stacks]
    kind = "mean" if definition.judged_by == "mean" else "well"
    if len(judged) > 1:
        for response, (colour, dash) in zip(judged, SERIES, strict=False):
            _line(axes, along, at, table[f"{response.name}_p_{kind}"], colour, dash, response)
    _line(axes, along, at, table["probability"], INK, "-", None)
    required_line(axes, definition.required_probability)
    set_point_line(axes, view, along)
    axes.set(ylim=(-0.03, 1.03), yticks=np.linspace(0, 1, 6))
    axes.set_ylabel(f"Probability to pass,\n{_JUDGED[definition.judged_by]}")
    dress(axes)


def _line(
    axes: Axes,
    along: Factor,
    at: np.ndarray,
    p: pd.Series,
    colour: str,
    dash: object,
    response: Response | None,
) -> None:
    label = "all at once" if response is None else f"{response.label} passes"
    width = 2.4 if response is None else 1.7
    style = {"linestyle": dash} if along.continuous else {"linestyle": "none", "marker": "o"}
    axes.plot(at, p, color=colour, linewidth=width, label=label, zorder=3, **style)
