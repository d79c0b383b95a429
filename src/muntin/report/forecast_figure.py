"""The forecast as a figure: what more test wells are expected to bring, and the stop rule."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from muntin.record.definition import StopRule
from muntin.record.study import Study
from muntin.report.ruling_text import ruling_line
from muntin.report.style import ACCENT, INK, QUIET, dress, new_figure
from muntin.report.words import share_text

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from muntin.bench.plan import Plan

_LINE = "#1c5a80"
_HEIGHT = 3.6
_LABELS = {
    "wrong_share": "May be called wrongly, % of the range",
    "set_point": "Probability of the set point, %",
}


def draw_forecast(study: Study, plan: Plan) -> Figure:
    """Draw the expected share called wrongly and the expected probability of the set point
    against test wells, with the limits of the stop rule that holds.

    The plan must have a forecast beyond 0 wells.
    """
    rule = study.stopping.rule or StopRule()
    limits = {"wrong_share": rule.wrong_share, "set_point": rule.best_probability}
    figure = new_figure(_HEIGHT, study.definition.title, ruling_line(study, plan))
    asked = int((plan.wells["role"] == "test").sum())
    for axes, (name, label) in zip(figure.subplots(1, 2), _LABELS.items(), strict=True):
        _panel(axes, plan.forecast, name, asked, limits[name])
        axes.set_ylabel(label)
        dress(axes)
    return figure


def _panel(axes: Axes, forecast: pd.DataFrame, name: str, asked: int, limit: float | None) -> None:
    wells = forecast["wells"].to_numpy()
    # Even steps: each count of wells doubles the one before.
    x, y = np.arange(len(wells)), 100.0 * forecast[name].to_numpy()
    axes.plot(x, y, color=_LINE, linewidth=2.2, marker="o", markersize=5, zorder=3)
    at = int(np.flatnonzero(wells == asked)[0])
    axes.plot(
        [x[at]],
        [y[at]],
        linestyle="none",
        marker="D",
        markersize=10,
        markerfacecolor="none",
        markeredgecolor=INK,
        markeredgewidth=1.4,
        zorder=4,
    )
    axes.annotate(
        "this plan", (x[at], y[at]), (0, 11), textcoords="offset points", ha="center", fontsize=8
    )
    axes.set_xticks(x, _ticks(forecast))
    axes.set_xlabel("Test wells" + (" (protein, mg)" if "mg" in forecast else ""))
    axes.margins(x=0.08, y=0.16)
    if limit is not None:
        _stop_line(axes, 100.0 * limit, limit)
    if name == "wrong_share":
        axes.set_ylim(bottom=0.0)


def _ticks(forecast: pd.DataFrame) -> list[str]:
    """Return "24", or "24" above "(9.5)" where protein is counted."""
    if "mg" not in forecast:
        return [f"{wells}" for wells in forecast["wells"]]
    pairs = zip(forecast["wells"], forecast["mg"], strict=True)
    return [f"{wells}\n({mg:.3g})" for wells, mg in pairs]


def _stop_line(axes: Axes, height: float, limit: float) -> None:
    """Draw the limit of the stop rule, named at the left end above the line."""
    axes.axhline(height, color=ACCENT, linewidth=1.6, linestyle=(0, (4, 3)), zorder=2)
    axes.annotate(
        f"stop rule {share_text(limit)}",
        (0.0, height),
        xycoords=("axes fraction", "data"),
        xytext=(3, 3),
        textcoords="offset points",
        fontsize=8,
        color=QUIET,
    )
