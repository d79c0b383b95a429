"""The figures of a report, in the order in which they are shown."""

from __future__ import annotations

from typing import TYPE_CHECKING

from muntin.report.drawn import Drawn
from muntin.window.assessment import Assessment

if TYPE_CHECKING:
    from muntin.bench.plan import Plan


def report_figures(view: Assessment, plan: Plan | None = None) -> tuple[Drawn, ...]:
    """Return every figure that a study has something for.

    Names: "map" (with frames), "sides", "together", "factor-<factor>", "predicted-<response>",
    "plates-<response>", "errors", "joint", "forecast", "protein"; what has nothing to show is left
    out, all of the model's where nothing was read or the data do not support the window.
    """
    raise NotImplementedError
