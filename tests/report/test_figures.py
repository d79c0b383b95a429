"""Figures: which one a study gets, and what is drawn on it."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from muntin.record import open_study
from muntin.report.figures import draw, saved
from muntin.report.verdicts import verdicts
from muntin.window.assessment import Assessment, assess
from muntin.window.window import Window
from tests.report.studies import (
    LOAD,
    ONE_FACTOR,
    RESIN,
    STUDY,
    one_factor_plate,
    plate,
    write,
)

PLAN = pd.DataFrame(
    {
        "well": ["A1", "A2", "A3", "A4"],
        "role": ["test", "test", "bridge", "blank"],
        "ph": [6.0, 6.0, 5.0, np.nan],
        "salt": [250.0, 250.0, 100.0, np.nan],
        "resin": ["A", "A", "B", None],
        "load": [5.0, 5.0, 10.0, np.nan],
    }
)
RESPONSES = "\n[[responses]]"
SMALL = {"study.toml": STUDY, "plates/plate-01.csv": plate()}
WITH_RESIN = {
    "study.toml": STUDY.replace(RESPONSES, RESIN + RESPONSES),
    "plates/plate-01.csv": plate(column="resin", value="A|B"),
}
WITH_LOAD = {
    "study.toml": STUDY.replace(RESPONSES, LOAD + RESPONSES),
    "plates/plate-01.csv": plate(column="load", value="5|10|20"),
}
WITH_LIMIT = {**SMALL, "study.toml": STUDY + '[[limits]]\nallow = "salt <= 1050 - 120 * ph"\n'}
ONE = {"study.toml": ONE_FACTOR, "plates/plate-01.csv": one_factor_plate()}
ALONE = {"study.toml": ONE_FACTOR, "plates/plate-01.csv": one_factor_plate(hcp=False)}
CHOICES = {
    "study.toml": '[study]\ntitle = "Resins, invented"\n'
    + RESIN
    + '[[responses]]\nname = "yield_g"\n'
    'label = "Yield"\nkind = "real"\nat_least = 5\ntypical = [0, 10]\n',
    "plates/plate-01.csv": "well,resin,yield_g\n"
    "A1,A,3.1\nA2,A,2.9\nA3,A,3.2\nA4,B,7.8\nA5,B,8.1\nA6,B,8\n",
}


def drawn(
    folder: Path, files: dict[str, str], plan: pd.DataFrame | None = PLAN, read: bool = True
) -> tuple[Figure, Assessment, Window | None]:
    view = assess(open_study(write(folder, {**files})), surrogate="quadratic")
    window = view.window() if read else None
    return draw(view, window, plan), view, window


def lines(axes: Axes, label: str) -> list[Line2D]:
    return [line for line in axes.get_lines() if line.get_label() == label]


def points(axes: Axes, label: str) -> int:
    return sum(len(line.get_xdata()) for line in lines(axes, label))  # type: ignore[arg-type]


def panels(figure: Figure) -> list[Axes]:
    return [axes for axes in figure.axes if axes.get_label() != "<colorbar>"]


def test_two_factors_make_a_map(tmp_path: Path) -> None:
    figure, view, window = drawn(tmp_path, SMALL)
    (axes,) = panels(figure)
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("pH", "Salt (mM)")
    verdict = verdicts(view.study)["verdict"]
    for name in ("passed", "failed"):
        assert points(axes, f"run, {name}") == (verdict == name).sum() > 0
    assert [points(axes, f"proposed{more}") for more in ("", ", bridging")] == [1, 1]
    assert lines(axes, "proposed, bridging")[0].get_xdata() == [5.0]
    assert window is not None
    (star,) = lines(axes, "set point" if window.share else "best so far")
    assert star.get_xdata() == [window.setpoint["ph"]]
    assert star.get_ydata() == [window.setpoint["salt"]]


def test_markers_are_told_apart_without_colour(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, SMALL)
    (axes,) = panels(figure)
    passed, failed, proposed, bridging = (
        lines(axes, label)[0]
        for label in ("run, passed", "run, failed", "proposed", "proposed, bridging")
    )
    assert passed.get_markerfacecolor() != failed.get_markerfacecolor()
    assert passed.get_marker() == failed.get_marker()
    assert len({line.get_marker() for line in (passed, proposed, bridging)}) == 3


def test_edge_follows_the_required_probability(tmp_path: Path) -> None:
    figure, _, window = drawn(tmp_path, SMALL)
    (axes,) = panels(figure)
    assert window is not None
    grid = window.grid.pivot(index="salt", columns="ph", values="probability")
    assert len(lines(axes, "edge, 0.90")) == 1
    contour = axes.collections[1]
    assert len(contour.get_paths()) == 1
    path = np.concatenate([p.vertices for p in contour.get_paths()])
    salts, phs = grid.index.to_numpy(float), grid.columns.to_numpy(float)
    for ph, salt in path:
        row = [np.interp(ph, phs, grid.loc[s]) for s in salts]
        assert np.interp(salt, salts, row) == pytest.approx(0.9, abs=1e-6)


def test_what_limits_forbid_is_hatched(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, WITH_LIMIT)
    (axes,) = panels(figure)
    assert "not allowed" in axes.get_legend_handles_labels()[1]


def test_a_factor_with_choices_gets_a_panel_a_choice(tmp_path: Path) -> None:
    figure, view, _ = drawn(tmp_path, WITH_RESIN)
    every = panels(figure)
    assert [axes.get_title(loc="left") for axes in every] == ["Resin A", "Resin B"]
    assert [points(axes, "proposed") for axes in every] == [1, 0]
    assert [points(axes, "proposed, bridging") for axes in every] == [0, 1]
    run = verdicts(view.study)
    for axes, choice in zip(every, ("A", "B"), strict=True):
        marks = sum(points(axes, f"run, {name}") for name in ("passed", "failed"))
        assert marks == (run["resin"] == choice).sum()
    assert sum(points(axes, "set point") + points(axes, "best so far") for axes in every) == 1


NAMED = '["Resin A", "Resin B", "Resin C"]'
CORNERS = pd.DataFrame(
    {
        "well": ["A1", "A2", "A3", "A4"],
        "role": "test",
        "ph": [4.5, 7.5, 7.5, 4.5],
        "salt": [50.0, 450.0, 50.0, 450.0],
        "resin": ["Resin A", "Resin B", "Resin A", "Resin C"],
    }
)
THREE_RESINS = {
    "study.toml": WITH_RESIN["study.toml"].replace('["A", "B"]', NAMED),
    "plates/plate-01.csv": plate(column="resin", value="Resin A|Resin B|Resin C"),
}


def test_a_choice_that_begins_with_the_label_heads_its_panel_alone(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, THREE_RESINS, CORNERS)
    titles = [axes.get_title(loc="left") for axes in panels(figure)]
    assert titles == ["Resin A", "Resin B", "Resin C"]


def test_marks_at_the_border_are_whole(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, THREE_RESINS, CORNERS)
    figure.draw_without_rendering()
    points_per_inch = 72.0
    for axes in panels(figure):
        assert all(not line.get_clip_on() for line in lines(axes, "proposed"))
        box = axes.get_window_extent()
        for line in axes.get_lines():
            if line.get_clip_on() and line.get_label().startswith("run"):
                at = axes.transData.transform(line.get_xydata())
                radius = line.get_markersize() / 2 * figure.dpi / points_per_inch
                assert (at - radius > box.min).all()
                assert (at + radius < box.max).all()


def test_name_of_the_colours_is_no_taller_than_the_panels(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, THREE_RESINS, CORNERS)
    figure.draw_without_rendering()
    name = figure.axes[-1].yaxis.label.get_window_extent()
    panel = panels(figure)[0].get_window_extent()
    assert panel.y0 <= name.y0 < name.y1 <= panel.y1
    assert name.x1 <= figure.bbox.x1


def test_name_of_the_edge_lies_on_it_and_apart_from_the_marks(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, SMALL, CORNERS.drop(columns="resin"))
    figure.draw_without_rendering()
    (axes,) = panels(figure)
    (name,) = [text for text in axes.texts if text.get_text() == "0.90"]
    box = name.get_window_extent()
    middle = np.array([(box.x0 + box.x1) / 2, (box.y0 + box.y1) / 2])
    edge = axes.collections[1].get_paths()
    on_edge = np.concatenate([axes.transData.transform(path.vertices) for path in edge])
    assert np.linalg.norm(on_edge - middle, axis=1).min() < 3
    marks = [axes.transData.transform(line.get_xydata()) for line in axes.get_lines()]
    nearest = min(np.linalg.norm(at - middle, axis=1).min() for at in marks if len(at))
    assert nearest > box.width
    assert name.get_zorder() > max(line.get_zorder() for line in axes.get_lines())


@pytest.mark.parametrize("files", [WITH_LOAD, ONE], ids=["panels", "line"])
def test_required_probability_is_named_beside_the_panel(
    tmp_path: Path, files: dict[str, str]
) -> None:
    plan = PLAN if files is WITH_LOAD else PLAN[["well", "role", "salt"]]
    figure, *_ = drawn(tmp_path, files, plan)
    figure.draw_without_rendering()
    axes = panels(figure)[0]
    (name,) = [text for text in axes.texts if text.get_text().startswith("required")]
    assert name.get_window_extent().x0 > axes.get_window_extent().x1
    assert name.get_window_extent().x1 <= figure.bbox.x1


def test_more_factors_get_a_panel_each(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, WITH_LOAD)
    every = panels(figure)
    assert [axes.get_xlabel() for axes in every] == ["pH", "Salt (mM)", "Load (mg/mL)"]
    assert every[2].get_xscale() == "log"
    assert [points(axes, "levels proposed") for axes in every] == [2, 2, 2]
    assert [points(axes, "levels run") for axes in every] == [7, 9, 3]


def test_panels_meet_at_the_set_point(tmp_path: Path) -> None:
    figure, _, window = drawn(tmp_path, WITH_LOAD)
    assert window is not None
    for axes, name in zip(panels(figure), ("ph", "salt", "load"), strict=True):
        curve = axes.get_lines()[1]
        x, y = (np.asarray(data, dtype=float) for data in curve.get_data())
        at = float(window.setpoint[name])
        assert np.interp(at, x, y) == pytest.approx(window.setpoint["probability"], abs=1e-9)


def test_one_factor_shows_readings_and_interval(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, ONE, PLAN[["well", "role", "salt"]])
    every = panels(figure)
    assert [a.get_ylabel() for a in every] == ["Probability", "Recovery", "HCP (ng/mL)"]
    assert every[-1].get_xlabel() == "Salt (mM)"
    for axes in every[1:]:
        assert points(axes, "run, passed") + points(axes, "run, failed") == 14
        assert "mean, 95 % interval" in axes.get_legend_handles_labels()[1]
    assert every[2].get_yscale() == "log"


def test_awaited_response_has_no_panel_and_the_title_says_so(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, ALONE, None)
    assert [a.get_ylabel() for a in panels(figure)] == ["Probability", "Recovery"]
    assert "Recovery alone, provisional:" in title(figure)


def test_choices_alone_get_bars(tmp_path: Path) -> None:
    figure, view, _ = drawn(tmp_path, CHOICES, None)
    (axes,) = panels(figure)
    assert [tick.get_text() for tick in axes.get_xticklabels()] == ["A", "B"]
    p = view.judged(pd.DataFrame({"resin": ["A", "B"]}), "well")
    assert [bar.get_height() for bar in axes.patches] == pytest.approx(list(p))


def title(figure: Figure) -> str:
    return " ".join(figure.get_suptitle().split())


def test_nothing_read_shows_the_plan_alone(tmp_path: Path) -> None:
    figure, *_ = drawn(tmp_path, {"study.toml": STUDY}, read=False)
    (axes,) = figure.axes
    assert (len(axes.collections), points(axes, "proposed")) == (0, 1)
    assert points(axes, "proposed, bridging") == 1
    assert title(figure).endswith("Nothing has been read yet: the opening plate")


@pytest.mark.parametrize("files", [SMALL, WITH_LOAD, ONE], ids=["map", "panels", "line"])
def test_window_that_is_not_supported_is_not_drawn(tmp_path: Path, files: dict[str, str]) -> None:
    _, view, window = drawn(tmp_path, files, None)
    assert window is not None
    figure = draw(view, replace(window, unsupported=("The model fails.",)))
    assert title(figure).endswith("not supported by the data")
    assert "Probability" not in [axes.get_ylabel() for axes in figure.axes]
    marks = [label for axes in figure.axes for label in axes.get_legend_handles_labels()[1]]
    assert marks
    assert not {"set point", "best so far"} & set(marks)


def test_saved_files_are_1200_pixels_wide_and_the_same_when_drawn_again(tmp_path: Path) -> None:
    first, second = (drawn(tmp_path, SMALL)[0] for _ in range(2))
    png, svg = saved(first, "png"), saved(first, "svg")
    assert png[:8] == b"\x89PNG\r\n\x1a\n"
    assert int.from_bytes(png[16:20], "big") == 1200
    assert b"<svg" in svg
    assert (saved(second, "png"), saved(second, "svg")) == (png, svg)


def test_scale_has_one_hue_and_darkens_evenly() -> None:
    from colorsys import rgb_to_hls

    from muntin.report.style import probability_colours

    colours = probability_colours()(np.linspace(0, 1, 11))[:, :3]
    hues, lightness, _ = np.array([rgb_to_hls(*colour) for colour in colours]).T
    assert np.ptp(hues) < 0.04
    assert (np.diff(lightness) < -0.03).all()
