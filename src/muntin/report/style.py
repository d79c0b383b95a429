"""The look of all figures: one hue for probability, ink for what was run, one accent for plans."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, Any

from muntin.record.factors import Factor
from muntin.report.words import axis_label

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.axis import Axis
    from matplotlib.colors import Colormap
    from matplotlib.figure import Figure
    from matplotlib.patheffects import AbstractPathEffect

INK, QUIET, PAPER = "#1f2a30", "#66727a", "#ffffff"
ACCENT = "#d5521a"
BARRED = "#e7e4de"
LINE, BAND = "#1c5a80", "#d3e3ec"
WIDTH, DPI = 8.0, 150
SLIDE = 4.5
# Dark enough for lines on white, apart for the colour-blind and, by lightness and dash, in grey.
SERIES: tuple[tuple[str, Any], ...] = (
    (LINE, "-"),
    ("#b3460f", (0, (5, 2))),
    ("#3d7d5a", (0, (1, 1.3))),
    ("#8a4f9a", (0, (6, 2, 1, 2))),
    ("#8f6a00", (0, (3, 1, 1, 1, 1, 1))),
    ("#56636b", (0, (8, 2))),
)
# From almost white to blue: one hue, lightness falls evenly, so it reads in grey too; ink still
# stands out on its dark end.
_HUE = ("#f6fafc", "#dbe9f1", "#bad5e4", "#94bdd4", "#6ba3c2", "#4288b0", "#2a719c")


def probability_colours() -> Colormap:
    """Return the colour scale from probability 0 to 1."""
    from matplotlib.colors import LinearSegmentedColormap

    return LinearSegmentedColormap.from_list("probability", list(_HUE))


def halo(width: float) -> list[AbstractPathEffect]:
    """Return a pale rim that keeps ink apart from what lies below it."""
    from matplotlib.patheffects import withStroke

    return [withStroke(linewidth=width, foreground=PAPER)]


def new_figure(height: float, title: str, subtitle: str) -> Figure:
    """Return an empty figure, 1200 pixels wide when saved, with a plain title."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(WIDTH, height), dpi=DPI, layout="constrained", facecolor=PAPER)
    lines = [*textwrap.wrap(title, 92)[:2], *textwrap.wrap(subtitle, 100)]
    figure.suptitle("\n".join(lines), x=0.012, ha="left", fontsize=10.5, color=INK)
    return figure


def dress(axes: Axes) -> None:
    """Give axes their quiet frame."""
    axes.spines[["top", "right"]].set_visible(False)
    axes.spines[["left", "bottom"]].set_color(QUIET)
    axes.tick_params(colors=QUIET, labelcolor=INK, labelsize=9)
    axes.xaxis.label.set_color(INK)
    axes.yaxis.label.set_color(INK)


def factor_axis(axes: Axes, factor: Factor, which: str, margin: float = 0.03) -> None:
    """Label the "x" or "y" axis by a factor with a range, on the factor's scale.

    `margin` is the share of the range that is left free beyond each end.
    """
    low, high, _ = factor.span
    label = axis_label(factor.label, factor.unit)
    more = (high / low) ** margin if factor.scale == "log" else margin * (high - low)
    ends = (low / more, high * more) if factor.scale == "log" else (low - more, high + more)
    axes.set(**{f"{which}label": label, f"{which}scale": factor.scale, f"{which}lim": ends})
    if factor.scale == "log":
        plain_ticks(axes.xaxis if which == "x" else axes.yaxis)


def plain_ticks(axis: Axis) -> None:
    """Give a log axis plain numbers at 1, 2 and 5 of each decade."""
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

    axis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axis.set_minor_formatter(NullFormatter())
