"""The figure of an uptake curve: readings, the curve with its interval, and the planned time."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from muntin.assay.uptake import Uptake, interval, three_digits
from muntin.report.markers import figure_legend
from muntin.report.style import ACCENT, BAND, INK, LINE, PAPER, QUIET, dress, halo, new_figure

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_HEIGHT = 5.0
_POINTS = 48
_PLANNED: dict[str, Any] = {"color": ACCENT, "linewidth": 1.6, "linestyle": (0, (5, 3))}
_MARK: dict[str, Any] = {"markersize": 6.5}
_SHOWN = 0.05  # weight from which a law has a line of its own
_DASHES: tuple[Any, ...] = ((0, (5, 2)), (0, (1, 1.4)), (0, (6, 2, 1, 2)), (0, (2, 3)))


def draw_uptake(title: str, uptake: Uptake, planned: float | None) -> Figure:
    """Draw one curve: the times to 90 and 95 % of equilibrium, and load against contact time."""
    t95 = uptake.time_to(0.95)
    told = (
        f"{uptake.curve.name}: 95 % of equilibrium after {three_digits(t95.median)} min "
        f"(95 % interval {three_digits(t95.low)} to {three_digits(t95.high)} min)"
    )
    figure = new_figure(_HEIGHT, title, told.replace(" %", "\N{NO-BREAK SPACE}%"))
    strip, axes = figure.subplots(2, 1, sharex=True, height_ratios=(1.0, 6.0))
    last = max(float(uptake.curve.times[-1]), planned or 0.0)
    end = 1.04 * max(last, min(1.05 * t95.median, 2.0 * last))
    _reached(strip, uptake, end)
    top = _curve(axes, uptake, end)
    _readings(axes, uptake)
    _equilibrium(axes, uptake)
    if planned is not None:
        strip.axvline(planned, **_PLANNED, zorder=1)
        _planned(axes, uptake, planned)
    axes.set(xlabel="Contact time (min)", ylabel="Load (mg/mL resin)", xlim=(0.0, end))
    axes.set_ylim(min(0.0, 1.08 * float(uptake.curve.loads.min())), 1.06 * top)
    dress(axes)
    figure_legend(figure, [axes, strip])
    return figure


def _curve(axes: Axes, uptake: Uptake, end: float) -> float:
    """Draw the mean with its interval and the laws' own curves; return the highest load shown."""
    times = end * np.linspace(0.0, 1.0, _POINTS) ** 2
    rows = [uptake.load_at(float(time)) for time in times[1:]]
    low, mean, high = (
        np.array([0.0, *(getattr(row, name) for row in rows)]) for name in ("low", "mean", "high")
    )
    axes.fill_between(times, low, high, color=BAND, label="95 % interval")
    axes.plot(times, mean, color=LINE, linewidth=2.2, label="expected load", zorder=3)
    ranked = sorted(zip(uptake.law_weights, uptake.grids, strict=True), key=lambda p: -p[0])
    shown = [(weight, grid) for weight, grid in ranked if weight >= _SHOWN]
    for dash, (weight, grid) in zip(_DASHES, shown if len(shown) > 1 else [], strict=False):
        own = [interval(grid.load_at(float(time)), grid.weights).median for time in times[1:]]
        name = f"{grid.law.name}, {100 * weight:.0f} %"
        axes.plot(times, [0.0, *own], color=INK, linewidth=1.2, linestyle=dash, label=name)
    return float(max(high.max(), uptake.curve.loads.max(), uptake.equilibrium().median))


def _readings(axes: Axes, uptake: Uptake) -> None:
    curve = uptake.curve
    look: dict[str, Any] = {
        "linestyle": "none",
        "markersize": 6.5,
        "color": INK,
        "markeredgecolor": INK,
        "path_effects": halo(2.6),
        "zorder": 4,
        "clip_on": False,
    }
    read = curve.sides == 0
    given = read & (curve.sds > 0)
    if given.any():
        axes.errorbar(
            curve.times[given],
            curve.loads[given],
            curve.sds[given],
            fmt="none",
            ecolor=INK,
            elinewidth=1.1,
            capsize=2.5,
            zorder=3.5,
        )
    axes.plot(curve.times[read], curve.loads[read], marker="o", label="reading", **look)
    for side, marker, label in ((1.0, "^", "reading, at least"), (-1.0, "v", "reading, at most")):
        here = curve.sides == side
        if here.any():
            axes.plot(
                curve.times[here],
                curve.loads[here],
                marker=marker,
                markerfacecolor=PAPER,
                label=label,
                **look,
            )


def _equilibrium(axes: Axes, uptake: Uptake) -> None:
    level = uptake.equilibrium()
    axes.axhline(level.median, color=QUIET, linewidth=1, linestyle=(0, (4, 3)), zorder=1)
    low, median, high = map(three_digits, (level.low, level.median, level.high))
    axes.annotate(
        f"equilibrium\n{median}\n({low} to {high})",
        (1.0, level.median),
        xycoords=("axes fraction", "data"),
        xytext=(7, 0),
        textcoords="offset points",
        va="center",
        fontsize=8,
        color=INK,
    )


def _reached(axes: Axes, uptake: Uptake, end: float) -> None:
    """Draw the times to 90 and 95 % of equilibrium; an arrow where an interval goes on."""
    shares = (0.90, 0.95)
    for row, share in enumerate(shares):
        found = uptake.time_to(share)
        axes.plot([found.low, min(found.high, end)], [row, row], color=LINE, linewidth=1.6)
        for time, marker in ((found.median, "s"), (found.high, ">")):
            if (time > end) == (marker == ">"):
                axes.plot([min(time, end)], [row], marker, color=LINE, clip_on=False, **_MARK)
    labels = [f"{100 * share:.0f} % after" for share in shares]
    axes.set(ylim=(-0.7, 1.7), yticks=[0, 1], yticklabels=labels)
    dress(axes)
    axes.tick_params(bottom=False, labelbottom=False)
    axes.spines[["left", "bottom"]].set_visible(False)
    axes.tick_params(left=False)


def _planned(axes: Axes, uptake: Uptake, planned: float) -> None:
    load = uptake.load_at(planned)
    axes.axvline(planned, **_PLANNED, zorder=2)
    axes.plot(
        [planned],
        [load.mean],
        linestyle="none",
        marker="D",
        markersize=9,
        markerfacecolor="none",
        markeredgecolor=ACCENT,
        markeredgewidth=1.8,
        path_effects=halo(3.4),
        label="planned time",
        zorder=6,
    )
