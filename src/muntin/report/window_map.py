"""The window map: one panel for a notebook, or a whole figure with the places of its panels."""

from __future__ import annotations

from collections.abc import Callable
from itertools import combinations
from typing import TYPE_CHECKING, Any

import pandas as pd

from muntin.record.factors import Factor
from muntin.report.canvas import blank, finish, one_panel
from muntin.report.drawn import Frame, frame_of
from muntin.report.figures import draw, figure_titles, proposed_conditions
from muntin.report.map import Conditions, colour_bar, draw_map, map_factors, map_panel
from muntin.report.markers import figure_legend
from muntin.report.style import INK, SLIDE
from muntin.report.verdicts import verdicts
from muntin.report.words import joined, setting_text
from muntin.window.assessment import Assessment
from muntin.window.window import Window

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from muntin.bench.plan import Plan

_PAIRED = 3
Placed = Callable[[], tuple[Frame, ...]]


def window_map(
    view: Assessment,
    axes: Axes | None = None,
    *,
    plan: Plan | None = None,
    x: str | None = None,
    y: str | None = None,
    choice: str | None = None,
    edge: bool = False,
) -> Axes:
    """Draw the judged probability over two factors, with the edge, the wells run and the set point.

    x, y: names of two factors with a range, the first two where None; other factors are held at the
    set point, one with choices at `choice` where given. plan: whose conditions are marked. edge:
    whether to draw the edge's 95 % interval, from `Assessment.handover`, which takes some seconds.
    Raises ValueError where there are no two such factors, or too many factors for a grid.
    """
    window = None if view.fresh or view.window().unsupported else view.window()
    across, up = _two(view, x, y)
    held = _held(view, window, (across, up), choice)
    title = figure_titles(view, window)
    axes, new = one_panel(axes, _held_title(view, held) or title[0], title[1])
    on_edge = _edge(view, window) if edge else None
    shade = _panel(axes, view, window, plan, (across, up), held, on_edge)
    if shade is not None and new:
        figure = axes.get_figure(root=True)
        assert figure is not None
        colour_bar(figure, shade, [axes], view.study.definition)
    return finish(axes, new)


def map_figure(view: Assessment, plan: Plan | None) -> tuple[Figure, Placed]:
    """Return the map of a report and what gives the places of its panels once it was drawn: a panel
    a choice, or one for every two of three factors; panels of single factors, which have no place,
    for all other studies.
    """
    window = None if view.fresh or view.window().unsupported else view.window()
    definition = view.study.definition
    wells = None if plan is None else plan.wells
    ranged = [f for f in definition.factors if f.continuous]
    factors = map_factors(definition)
    if factors is not None:
        x, y, panel = factors
        run, proposed = verdicts(view.study), proposed_conditions(view, wells)
        height = SLIDE if panel is None or len(panel.choices or ()) in (2, 3) else None
        titles = figure_titles(view, window)
        figure = draw_map(definition, window, run, proposed, titles, height, _edge(view, window))
        choices: list[dict[str, Any]] = [{}]
        if panel is not None:
            choices = [{panel.name: choice} for choice in panel.choices or ()]
        placed = [(x, y, held) for held in choices]
        return figure, lambda: _frames(figure, placed)
    if window is not None and len(ranged) == len(definition.factors) == _PAIRED:
        return _pairs(view, window, plan, ranged)
    return draw(view, view.window() if not view.fresh else None, wells), tuple


def _pairs(
    view: Assessment, window: Window, plan: Plan | None, ranged: list[Factor]
) -> tuple[Figure, Placed]:
    """A panel for every two factors, the third held at the set point."""
    pairs = [*combinations(ranged, 2)]
    title, says = figure_titles(view, window)
    where = "Each panel holds the other factor at the set point; wells run there are marked."
    figure, panels = blank(title, f"{says}. {where}", columns=len(pairs))
    placed, shade = [], None
    for axes, pair in zip(panels, pairs, strict=True):
        held = _held(view, window, pair, None)
        shade = _panel(axes, view, window, plan, pair, held, None, narrow=True) or shade
        axes.set_title(_held_title(view, held), loc="left", fontsize=9, color=INK)
        placed.append((*pair, held))
    if shade is not None:
        colour_bar(figure, shade, panels, view.study.definition)
    figure_legend(figure, panels)
    return figure, lambda: _frames(figure, placed)


def _frames(
    figure: Figure, placed: list[tuple[Factor, Factor, dict[str, Any]]]
) -> tuple[Frame, ...]:
    panels = [axes for axes in figure.axes if axes.get_label() != "<colorbar>"]
    return tuple(
        frame_of(axes, x.name, y.name, held)
        for axes, (x, y, held) in zip(panels, placed, strict=True)
    )


def _two(view: Assessment, x: str | None, y: str | None) -> tuple[Factor, Factor]:
    ranged = {f.name: f for f in view.study.definition.factors if f.continuous}
    if not view.fresh and not view.window().regular:
        raise ValueError("with so many factors the window is judged on no grid: see plots.factor")
    for name in (x, y):
        if name is not None and name not in ranged:
            raise ValueError(f"{name!r} is no factor with a range; there are {', '.join(ranged)}")
    left = [name for name in ranged if name not in (x, y)]
    first = x or (left.pop(0) if left else None)
    second = y or (left.pop(0) if left else None)
    if first is None or second is None or first == second:
        raise ValueError("a map needs two factors with a range: see plots.factor")
    return ranged[first], ranged[second]


def _held(
    view: Assessment, window: Window | None, shown: tuple[Factor, Factor], choice: str | None
) -> dict[str, Any]:
    held: dict[str, Any] = {}
    for factor in view.study.definition.factors:
        if factor in shown:
            continue
        if not factor.continuous and choice is not None:
            if choice not in (factor.choices or ()):
                known = ", ".join(factor.choices or ())
                raise ValueError(f"{choice!r} is no {factor.label}; there are {known}")
            held[factor.name] = choice
        elif window is not None:
            held[factor.name] = window.setpoint[factor.name]
    return held


def _held_title(view: Assessment, held: dict[str, Any]) -> str:
    factors = {f.name: f for f in view.study.definition.factors}
    return joined([setting_text(factors[name], value) for name, value in held.items()])


def _panel(
    axes: Axes,
    view: Assessment,
    window: Window | None,
    plan: Plan | None,
    pair: tuple[Factor, Factor],
    held: dict[str, Any],
    edge: pd.DataFrame | None,
    narrow: bool = False,
) -> Any:
    run = _there(view, verdicts(view.study), held)
    wells = None if plan is None else plan.wells
    proposed = _there(view, proposed_conditions(view, wells), held)
    on_edge = None if edge is None else _there(view, edge, held)
    marked = Conditions(run, proposed, on_edge)
    return map_panel(axes, view.study.definition, window, marked, pair, held, narrow)


def _edge(view: Assessment, window: Window | None) -> pd.DataFrame | None:
    """Return the conditions on the edge with its interval; None where the window has none."""
    handed = None if window is None or not window.share else view.handover()
    return None if handed is None or handed.edge.empty else handed.edge


def _there(view: Assessment, table: pd.DataFrame, held: dict[str, Any]) -> pd.DataFrame:
    """Return the conditions at the held values, to half a bench step."""
    factors = {f.name: f for f in view.study.definition.factors}
    for name, value in held.items():
        if factors[name].continuous:
            near = (table[name].astype(float) - value).abs() <= 0.5 * factors[name].span[2]
            table = table[near]
        else:
            table = table[table[name] == value]
    return table
