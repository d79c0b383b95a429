"""Observed against predicted: each reading beside what the others, or earlier plates, say of it."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.report.canvas import blank, finish, one_panel
from muntin.report.markers import figure_legend
from muntin.report.sections import response_named
from muntin.report.style import ACCENT, INK, PAPER, QUIET, SERIES, dress, plain_ticks
from muntin.report.words import axis_label, joined
from muntin.window.assessment import Assessment
from muntin.window.left_out import beforehand, left_out

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Array = NDArray[np.float64]
By = Literal["others", "plates before"]
_SAYS = {
    "others": "Predicted from all other readings",
    "plates before": "Predicted from the plates before",
}
_MARKERS = "osDP*X"
_RING: dict[str, Any] = {
    "linestyle": "none",
    "marker": "o",
    "markersize": 11,
    "markerfacecolor": "none",
    "markeredgecolor": ACCENT,
    "markeredgewidth": 1.6,
    "zorder": 4,
}


def predicted(
    view: Assessment,
    response: str | None = None,
    by: By = "others",
    axes: Axes | None = None,
) -> Axes:
    """Draw the readings of a response against what is predicted for them, with 95 % intervals.

    by: "others", all other readings, or "plates before", the plates before the reading's own (fits
    made anew, a second or two each). Readings outside their interval have a red rim. response: the
    first judged one read where None. Raises ValueError for other names, and where no plate has one
    before it.
    """
    read = response_named(view, response)
    table = predictions(view, read, by)
    if table.empty:
        raise ValueError("there are no plates before the first one: read a second plate")
    title = f"{read.label}: observed against predicted"
    axes, new = one_panel(axes, title, inside_text(table))
    _draw(axes, read, table, by)
    return finish(axes, new)


def predictions(view: Assessment, response: Response, by: By) -> pd.DataFrame:
    """Return the readings of a response with what is predicted for them. Raises ValueError."""
    if by not in _SAYS:
        raise ValueError(f"by {by!r} is none of {', '.join(_SAYS)}")
    return (left_out if by == "others" else beforehand)(view, response)


def predicted_figure(view: Assessment, response: Response) -> tuple[Figure, str]:
    """Return the figure of one response, by all others and, where there are later plates, by the
    plates before; and what it says.
    """
    tables: dict[By, pd.DataFrame] = {"others": left_out(view, response)}
    later = beforehand(view, response)
    if not later.empty:
        tables["plates before"] = later
    said = " ".join(f"{_SAYS[by]}: {inside_text(table)}." for by, table in tables.items())
    said += recorded_text(later)
    title = f"{response.label}: observed against predicted"
    figure, panels = blank(title, said, columns=len(tables), shared=False)
    plates = [*dict.fromkeys(tables["others"]["plate"])]
    for axes, (by, table) in zip(panels, tables.items(), strict=True):
        _draw(axes, response, table, by, plates)
    figure_legend(figure, panels)
    return figure, said


def recorded_text(later: pd.DataFrame) -> str:
    """Return which later plates were predicted then, and which are now; "" without later plates."""
    then = [*dict.fromkeys(later["plate"][later["recorded"].astype(bool)])]
    now = [*dict.fromkeys(later["plate"][~later["recorded"].astype(bool)])]
    parts = [f"{joined(then)} as recorded beforehand"] if then else []
    parts += [f"{joined(now)} computed now, as if not yet run"] if now else []
    return f" ({', '.join(parts)}.)" if parts else ""


def inside_text(table: pd.DataFrame) -> str:
    """Return how many readings lie in their interval, as "19 of 20 readings in their 95 % ..."."""
    known = table[table["censored"] == 0]
    inside = int((~_outside(known)).sum())
    return f"{inside} of {len(known)} readings in their 95 % interval"


def _outside(table: pd.DataFrame) -> pd.Series[bool]:
    return (table["observed"] < table["low"]) | (table["observed"] > table["high"])


def _draw(
    axes: Axes, response: Response, table: pd.DataFrame, by: By, plates: list[str] | None = None
) -> None:
    _diagonal(axes, response, table)
    plates = plates or [*dict.fromkeys(table["plate"])]
    for number, plate in enumerate(plates):
        here = table[table["plate"] == plate]
        if len(here):
            _plate(axes, here, plate, number)
    out = table[_outside(table) & (table["censored"] == 0)]
    if len(out):
        axes.plot(out["predicted"], out["observed"], label="outside its 95 %", **_RING)
    unit = axis_label("", response.unit).strip()
    axes.set(xlabel=f"{_SAYS[by]} {unit}".strip(), ylabel=f"{response.label}, read {unit}".strip())
    dress(axes)


def _plate(axes: Axes, here: pd.DataFrame, plate: str, number: int) -> None:
    """Mark the readings of one plate with their intervals; triangles where a limit was read."""
    colour = SERIES[number % len(SERIES)][0]
    axes.hlines(here["observed"], here["low"], here["high"], color=colour, alpha=0.4, zorder=2)
    own = _MARKERS[number % len(_MARKERS)]
    for side, marker in ((0, own), (-1, "v"), (1, "^")):
        one = here[here["censored"] == side]
        if len(one):
            axes.plot(
                one["predicted"],
                one["observed"],
                linestyle="none",
                marker=marker,
                markersize=5.5,
                markerfacecolor=colour if side == 0 else PAPER,
                markeredgecolor=PAPER if side == 0 else INK,
                markeredgewidth=0.6,
                label=plate if side == 0 else "only a limit was read",
                zorder=3,
            )


def _diagonal(axes: Axes, response: Response, table: pd.DataFrame) -> None:
    """Set the axes so that all intervals show; draw the diagonal and the limits of the target."""
    read = table["observed"].to_numpy(dtype=float)
    every = table[["observed", "predicted", "low", "high"]].to_numpy(dtype=float)
    log = response.kind == "positive"
    across, up = (_ends(values, log) for values in (every, read))
    if log:
        axes.set(xscale="log", yscale="log")
        for axis in (axes.xaxis, axes.yaxis):
            plain_ticks(axis)
    axes.set(xlim=across, ylim=up)
    axes.plot(across, across, color=QUIET, linewidth=1, zorder=1)
    for limit in (response.at_least, response.at_most):
        if limit is not None and up[0] < limit < up[1]:
            axes.axhline(limit, color=INK, linewidth=1, linestyle=(0, (4, 3)), label="target")


def _ends(values: Array, log: bool) -> tuple[float, float]:
    """Return the ends of an axis a little beyond the values."""
    low, high = float(np.nanmin(values)), float(np.nanmax(values))
    if log:
        more = max((high / low) ** 0.06, 1.05)
        return low / more, high * more
    more = 0.06 * (high - low) or 0.5
    return low - more, high + more
