"""The figures of a report, in the order in which they are shown."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from muntin.report import figure_words as words
from muntin.report.drawn import Drawn, drawn
from muntin.report.factor_figure import factor_figure
from muntin.report.forecast_figure import draw_forecast
from muntin.report.joint_figure import joint
from muntin.report.plates_figure import plates_figure
from muntin.report.predicted_figure import predicted_figure
from muntin.report.protein_figure import protein
from muntin.report.sides_figure import sides
from muntin.report.style import SLIDE
from muntin.report.together_figure import together
from muntin.report.window_map import map_figure
from muntin.window.assessment import Assessment

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from muntin.bench.plan import Plan


def report_figures(view: Assessment, plan: Plan | None = None) -> tuple[Drawn, ...]:
    """Return every figure that a study has something for.

    Names: "map" (with frames), "joint", "sides", "together", "factor-<factor>", "forecast",
    "predicted-<response>", "plates-<response>", "protein"; what has nothing to show is left out.
    Where the data do not support the window, its figures are left out too, but for a map of the
    wells; readings beside predictions stay, since they show why.
    """
    figures = [*_standing(view, plan), *_evidence(view)]
    if view.study.definition.protein is not None:
        says = words.protein_words(view.study, plan)
        figures.append(drawn(_of(protein(view.study, plan)), "protein", says))
    return tuple(figures)


def _standing(view: Assessment, plan: Plan | None) -> Iterator[Drawn]:
    figure, frames = map_figure(view, plan)
    yield drawn(figure, "map", words.map_words(view), frames)
    if view.fresh or view.window().unsupported:
        return
    yield drawn(_of(joint(view)), "joint", words.joint_words(view))
    if view.window().sides:
        slide = _of(sides(view, slide=True))
        yield drawn(_of(sides(view)), "sides", words.sides_words(view), slide=slide)
    if len(view.stacks) > 1:
        yield drawn(_of(together(view)[0]), "together", words.together_words(view))
    for factor in view.study.definition.factors:
        says = words.factor_words(view, factor)
        yield drawn(factor_figure(view, factor), f"factor-{factor.name}", says)
    if plan is not None and len(plan.forecast) > 1:
        figure = draw_forecast(view.study, plan, SLIDE)
        yield drawn(figure, "forecast", words.forecast_words(view, plan))


def _evidence(view: Assessment) -> Iterator[Drawn]:
    for response in view.study.definition.responses:
        if response.name not in view.stacks:
            continue
        figure, said = predicted_figure(view, response)
        yield drawn(figure, f"predicted-{response.name}", f"{response.label}. {said}")
        plates = plates_figure(view, response)
        if plates is not None:
            says = words.plates_words(view, response)
            yield drawn(plates, f"plates-{response.name}", says)


def _of(axes: Axes) -> Figure:
    figure = axes.get_figure(root=True)
    assert figure is not None
    return figure
