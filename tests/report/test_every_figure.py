"""Figures of a report: which there are, and what a page and a slide get of each."""

from __future__ import annotations

import re
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

from muntin.bench.plan import propose
from muntin.record import open_study
from muntin.report.drawn import Drawn, drawn, inline_svg
from muntin.report.every_figure import report_figures
from muntin.report.figures import saved
from muntin.report.predicted_figure import predicted_figure
from muntin.report.together_figure import together
from muntin.report.window_map import map_figure
from muntin.window.assessment import Assessment, assess
from tests.report.plotted import study
from tests.report.studies import LOAD, RESIN, STUDY, plate, write

RESPONSES = "\n[[responses]]"


@pytest.fixture(scope="module")
def view(tmp_path_factory: pytest.TempPathFactory) -> Assessment:
    return assess(study(tmp_path_factory.mktemp("figures")), surrogate="quadratic")


@pytest.fixture(scope="module")
def figures(view: Assessment) -> dict[str, Drawn]:
    return {figure.name: figure for figure in report_figures(view, propose(view, wells=6))}


def small(folder: Path, more: str = "", column: str = "", value: str = "") -> Assessment:
    text = STUDY.replace(RESPONSES, more + RESPONSES)
    files = {"study.toml": text, "plates/plate-01.csv": plate(column=column, value=value)}
    return assess(open_study(write(folder, {**files})), surrogate="quadratic")


def test_every_figure_of_a_study_with_all_of_it(figures: dict[str, Drawn]) -> None:
    assert list(figures) == [
        "map",
        "joint",
        "sides",
        "together",
        "factor-ph",
        "factor-salt",
        "forecast",
        "predicted-recovery",
        "plates-recovery",
        "predicted-hcp",
        "plates-hcp",
        "predicted-shift",
        "plates-shift",
        "protein",
    ]


def test_pictures_fit_a_slide(figures: dict[str, Drawn]) -> None:
    for name, figure in figures.items():
        width, height = (int.from_bytes(figure.png[i : i + 4], "big") for i in (16, 20))
        assert width == 1920
        assert 16 / 9 * 0.85 <= width / height <= 16 / 9 * 1.01, name


def test_sides_on_the_page_are_as_high_as_their_factors_need(figures: dict[str, Drawn]) -> None:
    (width, height) = re.findall(r'viewBox="0 0 ([\d.]+) ([\d.]+)"', figures["sides"].svg)[0]
    inches = 8.0 * float(height) / float(width)
    assert inches == pytest.approx(1.25 + 2 * 0.85, abs=0.01)


def test_ids_of_all_figures_together_are_each_their_own(figures: dict[str, Drawn]) -> None:
    ids = [
        found for figure in figures.values() for found in re.findall(r'\bid="([^"]+)"', figure.svg)
    ]
    assert len(ids) == len(set(ids)) > 100
    for figure in figures.values():
        referred = re.findall(r'href="#([^"]+)"|url\(#([^)]+)\)', figure.svg)
        assert referred
        assert {first or second for first, second in referred} <= set(ids)


def test_svg_stands_in_a_page_as_it_is(figures: dict[str, Drawn]) -> None:
    for figure in figures.values():
        assert figure.svg.startswith("<svg")
        assert figure.svg.endswith("</svg>")
        assert not re.search(r"<metadata|<text|font-family|https?://(?!www\.w3\.org)", figure.svg)


def test_drawn_again_they_are_the_same(view: Assessment, figures: dict[str, Drawn]) -> None:
    response = view.study.definition.responses[1]
    figure, said = predicted_figure(view, response)
    assert drawn(figure, "predicted-hcp", f"HCP. {said}") == figures["predicted-hcp"]


def test_words_are_of_what_is_drawn(view: Assessment, figures: dict[str, Drawn]) -> None:
    window = view.window()
    assert f"{100 * window.share:.1f} % of the range" in figures["map"].says
    for response in view.study.definition.judged:
        assert f"{response.label}: process mean " in figures["joint"].says
    assert all(len(figure.says) > 30 and figure.says[-1] in ".)" for figure in figures.values())
    assert all(figure.title for figure in figures.values())


def test_frame_of_the_map_lies_where_its_axes_do(
    view: Assessment, figures: dict[str, Drawn]
) -> None:
    (frame,) = figures["map"].frames
    assert (frame.x, frame.y, frame.held) == ("ph", "salt", {})
    assert frame.x_ends[0] < 4.5 < 7.5 < frame.x_ends[1]
    # The shades begin at the lowest levels: their outline lies there in the picture.
    box = re.search(r'viewBox="0 0 ([\d.]+) ([\d.]+)"', figures["map"].svg)
    assert box is not None
    width, height = float(box[1]), float(box[2])
    share = (4.5 - frame.x_ends[0]) / (frame.x_ends[1] - frame.x_ends[0])
    left = width * (frame.left + share * frame.width)
    up = (50.0 - frame.y_ends[0]) / (frame.y_ends[1] - frame.y_ends[0])
    low = height * (frame.top + (1.0 - up) * frame.height)
    pairs = np.array(re.findall(r"([\d.]+) ([\d.]+)", figures["map"].svg), dtype=float)
    assert np.linalg.norm(pairs - [left, low], axis=1).min() < 0.01


def test_three_factors_get_a_map_of_every_two(tmp_path: Path) -> None:
    view = small(tmp_path, LOAD, "load", "5|10|20")
    figure, placed = map_figure(view, None)
    frames = drawn(figure, "map", "", placed).frames
    point = view.window().setpoint
    assert [(f.x, f.y) for f in frames] == [("ph", "salt"), ("ph", "load"), ("salt", "load")]
    assert frames[0].held == {"load": point["load"]}
    assert [f.y_log for f in frames] == [False, True, True]
    assert all(a.left + a.width < b.left for a, b in pairwise(frames))


def test_choices_get_a_panel_each(tmp_path: Path) -> None:
    view = small(tmp_path, RESIN, "resin", "A|B")
    figure, placed = map_figure(view, None)
    frames = drawn(figure, "map", "", placed).frames
    assert [f.held for f in frames] == [{"resin": "A"}, {"resin": "B"}]
    assert frames[0].left + frames[0].width < frames[1].left
    assert frames[0].top == pytest.approx(frames[1].top)


def test_nothing_read_leaves_the_map_and_the_protein(tmp_path: Path) -> None:
    view = assess(open_study(write(tmp_path, {"study.toml": STUDY})), surrogate="quadratic")
    names = [figure.name for figure in report_figures(view, propose(view, wells=6))]
    assert names == ["map", "protein"]


def test_window_that_is_not_supported_leaves_the_evidence(tmp_path: Path) -> None:
    view = small(tmp_path)
    window = replace(view.window(), unsupported=("The model fails.",))
    view.__dict__["_window"] = window
    names = [figure.name for figure in report_figures(view)]
    assert names == ["map", "predicted-recovery", "protein"]


def test_ids_and_references_are_renamed_together() -> None:
    text = (
        '<?xml version="1.0"?>\n<svg><g id="a"/><use xlink:href="#a"/><b clip="url(#a)"/></svg>\n'
    )
    assert inline_svg(text, "x") == (
        '<svg><g id="x-a"/><use xlink:href="#x-a"/><b clip="url(#x-a)"/></svg>'
    )


def test_labels_of_axes_keep_clear_of_the_title(view: Assessment) -> None:
    figure = together(view)[0].get_figure(root=True)
    assert figure is not None
    saved(figure, "png")
    (title,) = [text for text in figure.texts if text.get_text().startswith("All responses")]
    below = title.get_window_extent().y0
    for axes in figure.axes:
        assert axes.yaxis.label.get_window_extent().y1 < below, axes.get_ylabel()
