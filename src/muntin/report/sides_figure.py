"""Which response fails first beyond each side of the ranges that hold together."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from muntin.record.factors import Factor
from muntin.report.canvas import finish, one_panel
from muntin.report.style import INK, LINE, PAPER, QUIET, SLIDE
from muntin.report.words import axis_label, odds_text, setting_text
from muntin.window.assessment import Assessment
from muntin.window.limiting import Side
from muntin.window.window import Window

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_FAILS = {"low": "too low", "high": "too high"}
_TESTED = "#dfe4e6"
_THIN, _NARROW = 0.012, 0.16
# The bars take the middle of the panel; words stand to either side of them.
_ENDS = (-0.58, 1.58)
# Inches that a factor takes, and title and legend together.
_ROW, _AROUND = 0.85, 1.25
# Words of a slide, which has room, beside those of a page.
_LARGER = 1.15


def sides(view: Assessment, axes: Axes | None = None, *, slide: bool = False) -> Axes:
    """Draw, factor by factor, the tested range, the ranges that hold together, and at each end the
    response that is met least beyond it, with its probability alone.

    Every factor's tested range is as wide as the panel's middle, on its own scale. A new figure is
    as high as its factors need, or has the shape of a slide. Raises ValueError where there are no
    ranges: no window, or factors without a range.
    """
    window = None if view.fresh else view.window()
    if window is None or window.ranges is None or not window.sides:
        raise ValueError("there are no ranges that hold together, so they have no sides")
    factors = [f for f in view.study.definition.factors if f.continuous]
    title, height = (
        "What fails first beyond the window",
        SLIDE if slide else _AROUND + _ROW * len(factors),
    )
    axes, new = one_panel(axes, title, _subtitle(view, window), height)
    for row, factor in enumerate(factors):
        _factor(axes, view, window, factor, -float(row))
    axes.set(xlim=_ENDS, ylim=(-len(factors) + 0.45, 0.62), xticks=[])
    axes.set_yticks([-float(i) for i in range(len(factors))])
    axes.set_yticklabels([axis_label(f.label, f.unit) for f in factors], fontsize=9.5, color=INK)
    axes.tick_params(length=0)
    axes.spines[:].set_visible(False)
    if slide:
        for text in (*axes.texts, *axes.get_yticklabels()):
            text.set_fontsize(_LARGER * float(text.get_fontsize()))
    return finish(axes, new)


def _subtitle(view: Assessment, window: Window) -> str:
    held = [
        setting_text(f, window.setpoint[f.name])
        for f in view.study.definition.factors
        if not f.continuous
    ]
    rest = f", {', '.join(held)}" if held else ""
    return f"Ranges that hold together within what was tested{rest}; chance to pass just beyond"


def _factor(axes: Axes, view: Assessment, window: Window, factor: Factor, row: float) -> None:
    ranges = window.ranges or {}
    low, high = (position(factor, float(np.asarray(v, dtype=float))) for v in ranges[factor.name])
    tested = "tested range" if row == 0 else None
    inside = "ranges that hold together" if row == 0 else None
    axes.barh(row, 1.0, height=0.22, color=_TESTED, label=tested, zorder=1)
    width = max(high - low, _THIN)
    axes.barh(
        row, width, left=0.5 * (low + high - width), height=0.34, color=LINE, label=inside, zorder=2
    )
    at = position(factor, float(window.setpoint[factor.name]))
    axes.plot(
        [at],
        [row],
        linestyle="none",
        marker="*",
        markersize=15,
        markerfacecolor=PAPER,
        markeredgecolor=INK,
        label="set point" if row == 0 else None,
        zorder=4,
    )
    _ends_of_ranges(axes, factor, ranges[factor.name], row)
    for end, x in ((factor.span[0], 0.0), (factor.span[1], 1.0)):
        axes.text(x, row - 0.19, factor.shown(end), ha="center", va="top", color=QUIET, fontsize=8)
    for side in window.sides:
        if side.factor == factor.name:
            _words(axes, view, side, row)


def _ends_of_ranges(axes: Axes, factor: Factor, ends: tuple[object, object], row: float) -> None:
    """Write the ends of the ranges above their bar, outward where it is narrow, once where it is
    one level.
    """
    low, high = (position(factor, float(np.asarray(end, dtype=float))) for end in ends)
    style: dict[str, Any] = {"va": "bottom", "color": INK, "fontsize": 9}
    if ends[0] == ends[1]:
        axes.text(low, row + 0.21, factor.shown(ends[0]), ha="center", **style)
        return
    sides = ("right", "left") if high - low < _NARROW else ("left", "right")
    for end, x, align in zip(ends, (low, high), sides, strict=True):
        axes.text(x, row + 0.21, factor.shown(end), ha=align, **style)


def _words(axes: Axes, view: Assessment, side: Side, row: float) -> None:
    x, align = (-0.05, "right") if side.end == "low" else (1.05, "left")
    told = side_text(view, side)
    colour = INK if side.response is not None else QUIET
    text = "\n".join(told)
    axes.text(x, row, text, ha=align, va="center", color=colour, fontsize=9, linespacing=1.25)


def side_text(view: Assessment, side: Side) -> tuple[str, str]:
    """Return what stands beyond a side, in two parts."""
    definition = view.study.definition
    if side.response is None or side.probability is None:
        (factor,) = (f for f in definition.factors if f.name == side.factor)
        last = factor.span[0 if side.end == "low" else 1]
        if abs(side.at - last) < 0.5 * factor.span[2]:
            return "passes as far", "as it was tested"
        return "passes as far", "as limits allow"
    (label,) = (r.label for r in definition.judged if r.name == side.response)
    chance = odds_text(side.probability, definition.required_probability)
    return f"{label} {_FAILS[str(side.fails)]}", f"chance to pass {chance}"


def position(factor: Factor, value: float) -> float:
    """Return where a value lies in the factor's tested range, 0 to 1, on the factor's scale."""
    low, high, _ = factor.span
    if factor.scale == "log":
        return float(np.log(value / low) / np.log(high / low))
    return (value - low) / (high - low)
