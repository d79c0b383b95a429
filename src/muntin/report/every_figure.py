"""The figures of a report, in the order in which they are shown."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from muntin.report.drawn import Drawn, drawn
from muntin.report.forecast_figure import draw_forecast
from muntin.report.window_map import map_figure
from muntin.window.assessment import Assessment

if TYPE_CHECKING:
    from muntin.bench.plan import Plan


def report_figures(view: Assessment, plan: Plan | None = None) -> tuple[Drawn, ...]:
    """Return every figure that a study has something for.

    Names: "map" (with frames), "sides", "together", "factor-<factor>", "predicted-<response>",
    "plates-<response>", "errors", "joint", "forecast", "protein"; what has nothing to show is left
    out, all of the model's where nothing was read or the data do not support the window.
    """
    return tuple(_every(view, plan))


def _every(view: Assessment, plan: Plan | None) -> Iterator[Drawn]:
    figure, frames = map_figure(view, plan)
    yield drawn(figure, "map", "Map of the judged probability.", frames)
    if plan is not None and not view.fresh and len(plan.forecast) > 1:
        yield drawn(draw_forecast(view.study, plan), "forecast", "Forecast against test wells.")
