"""The forecast as a figure: what more test wells are expected to bring, and the stop rule."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from muntin.design.stopping import asked_of_set_point
from muntin.record.definition import StopRule
from muntin.record.study import Study
from muntin.report.canvas import Panels, blank, given_panels
from muntin.report.markers import figure_legend
from muntin.report.ruling_text import ruling_line
from muntin.report.style import ACCENT, INK, LINE, PAPER, SLIDE, dress
from muntin.report.words import UNSUPPORTED, per_cent
from muntin.window.assessment import Assessment

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from muntin.bench.plan import Plan

_HEIGHT = 3.6


def forecast(view: Assessment, plan: Plan, axes: Sequence[Axes] | None = None) -> Panels:
    """Draw the forecast of a plan in two panels, as `draw_forecast` does.

    axes: two. Raises ValueError where there are not two, or where nothing was read.
    """
    if view.fresh:
        raise ValueError("before any reading nothing is forecast")
    if axes is None:
        return Panels(draw_forecast(view.study, plan, SLIDE).axes)
    panels = given_panels(axes, 2)
    _draw(view.study, plan, panels)
    return panels


def draw_forecast(study: Study, plan: Plan, height: float = _HEIGHT) -> Figure:
    """Draw the forecast against test wells, with the limits of the stop rule that holds: the
    expected share called wrongly; the expected probability of the set point and the chance that
    it is as probable as asked. height: of the figure, in inches.

    The plan must have a forecast beyond 0 wells.
    """
    # A number and its per cent sign stay on one line.
    verdict = ruling_line(study, plan).replace(" %", "\N{NO-BREAK SPACE}%")
    figure, panels = blank(study.definition.title, verdict, height, columns=2)
    _draw(study, plan, panels)
    figure_legend(figure, panels)
    return figure


def _draw(study: Study, plan: Plan, panels: Sequence[Axes]) -> None:
    rule, forecast = study.stopping.rule or StopRule(), plan.forecast
    left, right = panels
    at = int(np.flatnonzero(forecast["wells"] == (plan.wells["role"] == "test").sum())[0])
    _curve(left, forecast["wrong_share"], at, LINE, "o")
    left.set_ylabel("May be called wrongly, %")
    if forecast["set_point"].notna().any():
        _curve(right, forecast["set_point"], at, INK, "o", "set point, expected probability")
        asked = f"chance that it reaches {per_cent(asked_of_set_point(study))}"
        _curve(right, forecast["reached"], at, INK, "s", asked)
    else:
        said = f"no set point: the window\nis {UNSUPPORTED}"
        right.annotate(
            said, (0.5, 0.5), xycoords="axes fraction", ha="center", va="center", color=INK
        )
    right.set(ylabel="Set point, probability in %", ylim=(-4.0, 104.0))
    for axes, limit in ((left, rule.wrong_share), (right, rule.best_probability)):
        axes.set_xticks(np.arange(len(forecast)), _ticks(forecast))
        axes.set_xlabel("Test wells" + (" (protein, mg)" if "mg" in forecast else ""))
        axes.margins(x=0.08, y=0.16)
        _stop_line(axes, limit)
        dress(axes)
    left.set_ylim(bottom=0.0)


def _curve(
    axes: Axes, shares: pd.Series[float], at: int, colour: str, marker: str, label: str = ""
) -> None:
    """Draw shares against the counts of wells in even steps, the plan's filled."""
    x, y = np.arange(len(shares)), 100.0 * shares.to_numpy(dtype=float)
    style = "-" if marker == "o" else (0, (1, 1.2))
    axes.plot(
        x,
        y,
        color=colour,
        linewidth=2.0,
        linestyle=style,
        marker=marker,
        markersize=7,
        markerfacecolor=PAPER,
        markeredgewidth=1.6,
        label=label or None,
        zorder=3,
    )
    this = "this plan" if label == "" else None
    axes.plot(
        x[[at]], y[[at]], marker, color=colour, markersize=7, label=this, zorder=4, clip_on=False
    )


def _ticks(forecast: pd.DataFrame) -> list[str]:
    """Return "24", or "24" above "(9.5)" where protein is counted."""
    if "mg" not in forecast:
        return [f"{wells}" for wells in forecast["wells"]]
    pairs = zip(forecast["wells"], forecast["mg"], strict=True)
    return [f"{wells}\n({mg:.3g})" for wells, mg in pairs]


def _stop_line(axes: Axes, limit: float | None) -> None:
    """Draw the limit of the stop rule, if there is one, named beside the panel."""
    if limit is None:
        return
    axes.axhline(100.0 * limit, color=ACCENT, linewidth=1.6, linestyle=(0, (5, 3)), zorder=2)
    axes.annotate(
        f"stop rule\n{per_cent(limit)}",
        (1.0, 100.0 * limit),
        xycoords=("axes fraction", "data"),
        xytext=(6, 0),
        textcoords="offset points",
        va="center",
        fontsize=8,
        color=INK,
    )
