"""Figures for notebooks: what the axes that they return hold, against what the view says."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Literal

import matplotlib as mpl
import numpy as np
import pandas as pd
import pytest
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from muntin import plots
from muntin.bench.plan import Plan, propose
from muntin.bench.protein import protein_left_mg
from muntin.report.canvas import Panels
from muntin.window.assessment import Assessment, assess
from muntin.window.group_errors import group_errors
from muntin.window.left_out import beforehand, left_out
from tests.report.plotted import study

mpl.use("agg")
pytestmark = pytest.mark.filterwarnings("error")


@pytest.fixture(scope="module")
def view(tmp_path_factory: pytest.TempPathFactory) -> Assessment:
    return assess(study(tmp_path_factory.mktemp("plotted")), surrogate="quadratic")


@pytest.fixture(scope="module")
def plan(view: Assessment) -> Plan:
    return propose(view, wells=6)


def line(axes: Axes, label: str) -> Line2D:
    (found,) = (line for line in axes.get_lines() if line.get_label() == label)
    return found


def values(line: Line2D) -> tuple[np.ndarray, np.ndarray]:
    return np.asarray(line.get_xdata(), dtype=float), np.asarray(line.get_ydata(), dtype=float)


def own() -> Axes:
    return Figure().add_subplot()


def through(view: Assessment, name: str) -> pd.DataFrame:
    """Bench steps of a factor through the set point."""
    levels = next(f for f in view.study.definition.factors if f.name == name).levels()
    point = view.window().setpoint
    held = {n: [point[n]] * len(levels) for n in view.study.definition.factor_names}
    return pd.DataFrame({**held, name: levels})


def test_factor_draws_mean_and_interval_that_the_view_says(view: Assessment) -> None:
    axes = plots.factor(view, "salt", "hcp")
    frame = through(view, "salt")
    known = view.at(frame)
    x, y = values(line(axes, "process mean"))
    np.testing.assert_allclose(x, frame["salt"])
    np.testing.assert_allclose(y, known["hcp_mean"])
    (band,) = (c for c in axes.collections if c.get_label() == "mean, 95 %")
    corners = band.get_paths()[0].vertices
    np.testing.assert_allclose(corners[:, 1].min(), known["hcp_low"].min())
    np.testing.assert_allclose(corners[:, 1].max(), known["hcp_high"].max())
    assert values(line(axes, "target"))[1].tolist() == [100.0, 100.0]
    assert values(line(axes, "set point"))[0].tolist() == [view.window().setpoint["salt"]] * 2
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("Salt (mM)", "HCP (ng/mL)")
    assert axes.get_yscale() == "log"


def test_new_wells_reach_further_than_the_mean(view: Assessment) -> None:
    axes = plots.factor(view, "ph", "shift")
    reach = {
        str(c.get_label()): np.ptp(c.get_paths()[0].vertices[:, 1])
        for c in axes.collections
        if "95 %" in str(c.get_label())
    }
    assert reach["new wells, 95 %"] > 1.05 * reach["mean, 95 %"]


def test_only_wells_on_the_line_are_marked(view: Assessment) -> None:
    point = view.window().setpoint
    axes = plots.factor(view, "ph", "recovery")
    readings = view.study.readings("recovery")
    near = readings[(readings["salt"] - point["salt"]).abs() <= 25.0]
    marked = [mark for mark in axes.get_lines() if mark.get_label() == "wells run"]
    x = np.concatenate([values(mark)[0] for mark in marked]) if marked else np.zeros(0)
    assert sorted(x) == sorted(near["ph"])
    assert len(near)


def test_responses_together_have_their_chances_and_limits(view: Assessment) -> None:
    panels = plots.together(view, "salt")
    frame = through(view, "salt")
    known = view.at(frame)
    assert len(panels) == 4
    for label, column in (("Recovery passes", "recovery_p_well"), ("HCP passes", "hcp_p_well")):
        np.testing.assert_allclose(values(line(panels[0], label))[1], known[column])
    joint = values(line(panels[0], "all at once"))[1]
    np.testing.assert_allclose(joint, view.judged(frame, "kept"))
    names = [axes.get_ylabel() for axes in panels[1:]]
    assert names == ["Recovery", "HCP (ng/mL)", "Shift (mV)"]
    limits = [axes_line.get_ydata()[0] for axes_line in panels[3].get_lines()
              if axes_line.get_label() == "target"]  # fmt: skip
    assert limits == [-3.0, 2.0]


def test_together_takes_the_axes_given_or_says_how_many(view: Assessment) -> None:
    given = list(Figure().subplots(1, 4))
    assert list(plots.together(view, "ph", axes=given)) == given
    with pytest.raises(ValueError, match="this figure has 4 panels, and 2 axes were given"):
        plots.together(view, axes=given[:2])


def test_observed_against_predicted(view: Assessment) -> None:
    axes = plots.predicted(view, "hcp")
    response = view.study.definition.responses[1]
    table = left_out(view, response)
    for plate, part in table.groupby("plate"):
        x, y = values(line(axes, str(plate)))
        np.testing.assert_allclose(x, part["predicted"])
        np.testing.assert_allclose(y, part["observed"])
    ends = np.concatenate([np.asarray(c.get_segments())[:, :, 0] for c in axes.collections])
    np.testing.assert_allclose(ends, table[["low", "high"]])
    assert axes.get_ylabel() == "HCP, read (ng/mL)"
    assert axes.get_xlabel() == "Predicted from all other readings (ng/mL)"


def test_readings_outside_their_interval_are_ringed(view: Assessment) -> None:
    response = view.study.definition.responses[0]
    table = left_out(view, response)
    out = table[(table["observed"] < table["low"]) | (table["observed"] > table["high"])]
    axes = plots.predicted(view)
    rings = [mark for mark in axes.get_lines() if mark.get_label() == "outside its 95 %"]
    ringed = values(rings[0])[1].tolist() if rings else []
    assert ringed == out["observed"].tolist()
    title = axes.get_figure(root=True).get_suptitle()
    assert f"{len(table) - len(out)} of {len(table)} readings" in title


def test_later_plates_are_predicted_by_the_plates_before(view: Assessment) -> None:
    axes = plots.predicted(view, "shift", by="plates before")
    table = beforehand(view, view.study.definition.responses[2])
    assert set(table["plate"]) == {"plate-02"}
    np.testing.assert_allclose(values(line(axes, "plate-02"))[0], table["predicted"])
    with pytest.raises(ValueError, match="by 'luck' is none of others, plates before"):
        plots.predicted(view, by="luck")  # type: ignore[arg-type]


def test_controls_are_the_conditions_of_several_plates(view: Assessment) -> None:
    axes = plots.controls(view)
    readings = view.study.readings("recovery")
    means = readings.groupby(["ph", "salt", "plate"])["y"].mean().unstack()
    again = means.dropna()
    assert len(again) > 2
    drawn = {
        str(mark.get_label()): values(mark)[1].tolist()
        for mark in axes.get_lines()
        if str(mark.get_label()).startswith("pH ")
    }
    for (ph, salt), both in again.iterrows():
        assert drawn[f"pH {ph:.1f} and Salt {salt:.0f} mM"] == pytest.approx([*both])
    assert [tick.get_text() for tick in axes.get_xticklabels()] == ["plate-01", "plate-02"]


def test_errors_are_those_of_the_groups(view: Assessment) -> None:
    axes = plots.errors(view, "hcp")
    table = group_errors(view, view.study.definition.responses[1])
    np.testing.assert_allclose(values(line(axes, "error, 95 %"))[0], table["error"])
    assert axes.get_xlabel() == "Error (% of the reading)"
    assert [t.get_text() for t in axes.get_yticklabels()] == table["group"].tolist()
    with pytest.raises(ValueError, match="names no shared error that touches Shift"):
        plots.errors(view, "shift")
    with pytest.raises(ValueError, match="'day' is no shared error of HCP; there are plate and ph"):
        plots.errors(view, "hcp", by="day")


def test_joint_pass_by_response(view: Assessment) -> None:
    axes = plots.joint(view)
    names = [*view.study.definition.factor_names]
    known = view.at(pd.DataFrame([view.window().setpoint[names].to_dict()])).iloc[0]
    found = {(float(x), round(float(y))) for mark in axes.get_lines()
             for x, y in zip(*values(mark), strict=True) if mark.get_marker() in "oD"}  # fmt: skip
    for row, response in enumerate(("recovery", "hcp", "shift")):
        for kind in ("p_mean", "p_well"):
            assert (float(known[f"{response}_{kind}"]), -row) in found
    assert {(float(known[kind]), -3) for kind in ("p_mean", "p_well", "p_kept")} <= found
    ticks = [tick.get_text() for tick in axes.get_yticklabels()]
    assert ticks == ["Recovery", "HCP", "Shift", "all targets at once"]


def test_sides_name_what_fails_first(view: Assessment) -> None:
    axes = plots.sides(view)
    window = view.window()
    assert window.ranges is not None
    words = [text.get_text() for text in axes.texts]
    for side in window.sides:
        if side.response is None:
            assert "passes as far\nas it was tested" in words
        else:
            label = {"recovery": "Recovery", "hcp": "HCP", "shift": "Shift"}[side.response]
            assert any(t.startswith(f"{label} too {side.fails}") for t in words)
    bars = [patch for patch in axes.patches if patch.get_height() > 0.3]  # type: ignore[attr-defined]
    for bar, factor in zip(bars, view.study.definition.factors, strict=True):
        low, high, _ = factor.span
        ends = [(float(v) - low) / (high - low) for v in window.ranges[factor.name]]  # type: ignore[arg-type]
        x, width = bar.get_x(), bar.get_width()  # type: ignore[attr-defined]
        assert [x, x + width] == pytest.approx(ends)


def test_map_marks_set_point_wells_and_plan(view: Assessment, plan: Plan) -> None:
    axes = plots.window_map(view, plan=plan)
    point = view.window().setpoint
    star = line(axes, "set point")
    assert [v.item() for v in values(star)] == [point["ph"], point["salt"]]
    tests = plan.wells[plan.wells["role"] == "test"][["ph", "salt"]].drop_duplicates()
    assert len(values(line(axes, "proposed"))[0]) == len(tests)
    turned = plots.window_map(view, own(), x="salt", y="ph")
    assert (turned.get_xlabel(), turned.get_ylabel()) == ("Salt (mM)", "pH")
    with pytest.raises(ValueError, match="'resin' is no factor with a range; there are ph, salt"):
        plots.window_map(view, x="resin")


def test_edge_has_the_interval_of_the_hand_over(view: Assessment) -> None:
    axes = plots.window_map(view, own(), edge=True)
    handed = view.handover()
    assert handed is not None
    drawn = [mark for mark in axes.get_lines() if mark.get_marker() in "|_"]
    assert len(drawn) == len(handed.edge) > 2
    for mark, (_, row) in zip(drawn, handed.edge.iterrows(), strict=True):
        ends = [row[row["factor"]] if np.isnan(row[end]) else row[end] for end in ("low", "high")]
        x, y = values(mark)
        assert (x if row["factor"] == "ph" else y).tolist() == pytest.approx(ends)
    assert not [mark for mark in plots.window_map(view).get_lines() if mark.get_marker() in "|_"]


def test_forecast_has_the_plan_s_shares(view: Assessment, plan: Plan) -> None:
    left, right = plots.forecast(view, plan)
    shares = 100 * plan.forecast["wrong_share"]
    np.testing.assert_allclose(values(left.get_lines()[0])[1], shares)
    assert left.get_xlabel() == right.get_xlabel() == "Test wells (protein, mg)"


def test_protein_steps_add_up(view: Assessment, plan: Plan) -> None:
    axes = plots.protein(view.study, plan)
    widths = [patch.get_width() for patch in axes.patches]  # type: ignore[attr-defined]
    assert plan.protein_mg is not None
    left = protein_left_mg(view.study)
    assert left is not None
    assert widths == pytest.approx(
        [40, 14 * 0.25, 12 * 0.25, plan.protein_mg, 10, left - plan.protein_mg]
    )
    assert axes.get_xlabel() == "Protein (mg)"


EVERY = ("controls", "errors", "factor", "joint", "predicted", "sides", "window_map")


@pytest.mark.parametrize("name", EVERY)
def test_given_axes_are_the_ones_returned(view: Assessment, name: str) -> None:
    axes = own()
    assert getattr(plots, name)(view, axes=axes) is axes
    assert axes.has_data()
    assert axes.get_title(loc="left")


@pytest.mark.parametrize("name", ["controls", "errors", "joint", "window_map"])
@pytest.mark.parametrize("layout", ["constrained", None])
def test_legend_of_given_axes_is_on_the_page_and_covers_no_text(
    view: Assessment, name: str, layout: Literal["constrained"] | None
) -> None:
    figure = Figure(figsize=(3.6, 6.0), layout=layout)
    axes = figure.subplots()
    getattr(plots, name)(view, axes=axes)
    figure.draw_without_rendering()
    legend = axes.get_legend()
    assert legend is not None
    around, given, page = legend.get_window_extent(), axes.get_window_extent(), figure.bbox
    assert page.x0 <= around.x0 < around.x1 <= page.x1
    if layout is None:
        assert given.x0 <= around.x0 < around.x1 <= given.x1
        assert given.y0 <= around.y0 < around.y1 <= given.y1
        assert legend.get_frame_on()
    else:
        label = axes.xaxis.label.get_window_extent()
        assert page.y0 <= around.y0 < around.y1 <= label.y0


def test_new_axes_show_their_figure_and_pyplot_knows_none(view: Assessment, plan: Plan) -> None:
    from matplotlib import pyplot

    shown = [
        plots.joint(view),
        plots.together(view),
        plots.forecast(view, plan),
        plots.protein(view.study),
    ]
    assert isinstance(shown[1], Panels)
    for axes in shown:
        assert axes._repr_png_()[:8] == b"\x89PNG\r\n\x1a\n"  # type: ignore[union-attr]
    assert pyplot.get_fignums() == []


def test_unknown_names_are_told_with_those_there_are(view: Assessment) -> None:
    with pytest.raises(ValueError, match="'temp' is no factor; there are ph, salt"):
        plots.factor(view, "temp")
    with pytest.raises(
        ValueError, match="'yield' is no response with readings; there are recovery, hcp, shift"
    ):
        plots.predicted(view, "yield")


def test_matplotlib_is_imported_when_something_is_drawn(tmp_path: Path) -> None:
    import subprocess

    code = "import muntin, muntin.plots, sys; sys.exit('matplotlib' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False, cwd=tmp_path).returncode == 0
