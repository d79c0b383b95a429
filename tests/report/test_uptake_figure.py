"""The figure of an uptake curve: what it shows, and that nothing of it is cut off."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.text import Text

from muntin.assay.uptake import Uptake, judge_uptake
from muntin.report.figures import saved
from muntin.report.uptake_figure import draw_uptake
from tests.assay.curves import PRIORS, curve

TIMES = (5, 20, 20, 60, 60, 120)


@pytest.fixture(scope="module")
def open_laws() -> Uptake:
    """Two readings and what is offered: four laws are open."""
    return judge_uptake(curve((60, 120), (20, 32), offered=60.0), PRIORS)


@pytest.fixture(scope="module")
def limits() -> Uptake:
    read = curve(
        TIMES, (9, 27, 20, 43, 47, 48), sds=(0.5, 0, 0, 1.0, 0, 0.8), sides=(0, 0, 1, 0, -1, 0)
    )
    return judge_uptake(read, PRIORS)


def labels(figure: Figure) -> list[str]:
    return [text.get_text() for legend in figure.legends for text in legend.get_texts()]


def texts(figure: Figure) -> Iterator[Text]:
    for text in figure.findobj(Text):
        if isinstance(text, Text) and text.get_text().strip() and text.get_visible():
            yield text


def test_axes_have_units_and_the_legend_names_all(open_laws: Uptake) -> None:
    figure = draw_uptake("Invented", open_laws, 60.0)
    strip, axes = figure.axes
    assert axes.get_xlabel() == "Contact time (min)"
    assert axes.get_ylabel() == "Load (mg/mL resin)"
    assert [tick.get_text() for tick in strip.get_yticklabels()] == ["90 % after", "95 % after"]
    named = labels(figure)
    assert named[:2] == ["95 % interval", "expected load"]
    assert named[-2:] == ["reading", "planned time"]
    pairs = zip(open_laws.law_weights, open_laws.grids, strict=True)
    shown = {grid.law.name for weight, grid in pairs if weight >= 0.05}
    assert {name.split(",")[0] for name in named if name.endswith("%")} == shown
    assert len(shown) == 3


def test_one_law_has_no_line_of_its_own(limits: Uptake) -> None:
    named = labels(draw_uptake("Invented", limits, None))
    assert "reading, at least" in named
    assert "reading, at most" in named
    assert "planned time" not in named


def test_the_expected_load_is_drawn_where_it_is(limits: Uptake) -> None:
    axes = draw_uptake("Invented", limits, 60.0).axes[1]
    lines = {line.get_label(): line for line in axes.get_lines()}
    load = limits.load_at(60.0).mean
    assert lines["planned time"].get_xydata().tolist() == [[60.0, load]]
    x, y = lines["expected load"].get_data()
    assert float(np.interp(60.0, x, y)) == pytest.approx(load, rel=0.01)
    assert lines["reading"].get_xydata().shape == (4, 2)


@pytest.mark.parametrize("name", ["open_laws", "limits"])
def test_no_text_is_cut_off(name: str, request: pytest.FixtureRequest) -> None:
    figure = draw_uptake("Invented " * 12, request.getfixturevalue(name), 45.0)
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    width, height = canvas.get_width_height()
    ends = figure.axes[1].get_xlim()
    for text in texts(figure):
        if text in figure.axes[1].get_xticklabels() + figure.axes[0].get_xticklabels():
            continue  # ticks beyond the axis are not drawn
        box = text.get_window_extent(canvas.get_renderer())
        assert box.x0 >= -1, text.get_text()
        assert box.x1 <= width + 1, text.get_text()
        assert box.y0 >= -1, text.get_text()
        assert box.y1 <= height + 1, text.get_text()
    assert ends[0] == 0.0


def test_drawn_twice_it_is_the_same_file(limits: Uptake) -> None:
    first, second = (saved(draw_uptake("Invented", limits, 60.0), "png") for _ in range(2))
    assert first == second
