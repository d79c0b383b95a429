"""Pages of all sorts of studies: fresh, provisional, without a window, of several responses."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from muntin.bench.plan import Plan
from muntin.record.definition import Definition
from muntin.report.drawn import Drawn, Frame, drawn
from muntin.report.page.build import Page
from muntin.report.page.pointing import pointed_at
from muntin.report.window_map import map_figure
from muntin.report.words import odds_text
from muntin.window.assessment import Assessment
from muntin.window.window import Window
from tests.report.pages import PLAIN, page_of
from tests.report.parsed import Element, parsed, table_of
from tests.report.studies import ONE_FACTOR, RESIN, STUDY, one_factor_plate, plate, write
from tests.studies import LOAD as LOAD_KEYS
from tests.studies import PH, tables
from tests.studies import RESIN as RESIN_KEYS

NO_WINDOW = Window(
    grid=pd.DataFrame(),
    regular=True,
    share=0.0,
    wrong_share=0.0,
    setpoint=pd.Series(dtype=float),
    ranges=None,
    unsupported=(),
)


def only_the_map(view: Assessment, plan: Plan | None = None) -> tuple[Drawn, ...]:
    """The map alone; the other figures have tests of their own."""
    figure, frames = map_figure(view, plan)
    return (drawn(figure, "map", "The map of this small study.", frames),)


@pytest.fixture
def _one_figure(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("muntin.report.page.build.report_figures", only_the_map)


def _said(folder: Path, files_: dict[str, str | bytes], wells: int = 0) -> tuple[Page, Element]:
    page = page_of(write(folder, files_), wells)
    return page, parsed(page.html)


@pytest.mark.usefixtures("_one_figure")
def test_a_study_without_readings_says_so(tmp_path: Path) -> None:
    header = "well,role,ph,salt,recovery,exclude\n"
    page, read = _said(
        tmp_path / "s", {"study.toml": STUDY, "plates/plate-01.csv": header}, wells=6
    )
    assert page.facts["standing"] == "Nothing read yet"
    told = page.facts["answer"]
    assert told[0] == "Nothing has been read yet, so there is no window."
    assert told[1].startswith("The study asks for Recovery at least 0.8, with a probability of")
    assert told[2].startswith("Next comes an opening plate, plate-01")
    assert len(table_of(read, "Conditions of plate-01")) > 1
    assert not [t for t in read.every("table") if "Ranges" in t.one("caption").text]


@pytest.mark.usefixtures("_one_figure")
def test_a_response_awaited_makes_it_provisional(tmp_path: Path) -> None:
    tables = {"study.toml": ONE_FACTOR, "plates/plate-01.csv": one_factor_plate(hcp=False)}
    page, read = _said(tmp_path / "s", tables)
    assert page.facts["standing"] == "Provisional"
    assert page.facts["answer"][0].startswith("Provisional, as HCP is not read yet: Salt ")
    assert "(Recovery at least 0.8)" in page.facts["answer"][0]
    assert "HCP at most 100 ng/mL" in read.one("section", id="holds-for").text


@pytest.mark.usefixtures("_one_figure")
def test_several_responses_are_told_alone_and_jointly(tmp_path: Path) -> None:
    tables = {"study.toml": ONE_FACTOR, "plates/plate-01.csv": one_factor_plate()}
    page, read = _said(tmp_path / "s", tables)
    first = table_of(read, "Probabilities at single conditions, by response and jointly")[0]
    known = page.basis.view.at(page.basis.window.setpoint.to_frame().T.astype(float))  # type: ignore[union-attr]
    assert first["Recovery: new well passes"] == odds_text(known["recovery_p_well"].iloc[0], 0.9)
    assert first["HCP: new well passes"] == odds_text(known["hcp_p_well"].iloc[0], 0.9)
    assert first["all: new well passes"] == odds_text(known["p_well"].iloc[0], 0.9)
    sides = table_of(read, "What gives way first")
    assert {row["gives way"] for row in sides} <= {
        "Recovery too low",
        "HCP too high",
        "passes as far as it was tested",
    }


@pytest.mark.usefixtures("_one_figure")
def test_no_condition_in_the_window(tmp_path: Path) -> None:
    toml = STUDY.replace("at_least = 0.8", "at_least = 0.99")
    page, read = _said(tmp_path / "s", {"study.toml": toml, "plates/plate-01.csv": plate()})
    assert page.facts["standing"] == "No window yet"
    assert page.facts["answer"][0].startswith(
        "No condition reaches the required probability of 0.90 (Recovery at least 0.99); the best "
        "so far is pH "
    )
    assert not [s for s in read.every("section") if s.attributes["id"] == "ranges"]


@pytest.mark.usefixtures("_one_figure")
def test_a_window_that_the_data_do_not_support_gives_no_set_point(tmp_path: Path) -> None:
    noisy = plate(12).splitlines()
    rows = [
        f"{','.join(line.split(',')[:4])},{0.05 if i % 2 else 0.95}," if i else line
        for i, line in enumerate(noisy)
    ]
    second = [
        noisy[0],
        *(f"{','.join(r.split(',')[:4])},0.9{i % 10}," for i, r in enumerate(rows[1:])),
    ]
    tables = {"plates/plate-01.csv": "\n".join(rows), "plates/plate-02.csv": "\n".join(second)}
    page, read = _said(tmp_path / "s", {"study.toml": PLAIN, **tables}, wells=6)
    assert page.facts["standing"] == "Not supported by the data"
    assert page.facts["answer"][0].endswith("so no set point is given.")
    assert page.facts["answer"][1].startswith(page.facts["window"]["unsupported"][0])
    assert "set point" not in read.one("section", id="window").text.lower()
    ahead = read.one("section", id="next").text
    assert "No set point is forecast: " in ahead
    assert "set point passes" not in ahead
    assert not [s for s in read.every("script") if s.attributes.get("id") == "pointing-data"]


@pytest.mark.usefixtures("_one_figure")
def test_three_factors_one_with_choices_and_per_cent(tmp_path: Path) -> None:
    toml = PLAIN.replace("at_least = 0.8", 'at_least = 80\nunit = "%"') + RESIN
    rows = plate(16, "resin", "A|B|B").splitlines()
    scaled = [rows[0]]
    for row in rows[1:]:
        *front, value, _ = row.split(",")
        scaled.append(",".join([*front, f"{100 * float(value):.1f}", ""]))
    tables: dict[str, str | bytes] = {"plates/plate-01.csv": "\n".join(scaled)}
    page, read = _said(tmp_path / "s", {"study.toml": toml, **tables})
    assert "Recovery at least 80 %" in page.facts["answer"][0]
    panels = json.loads(read.one("script", id="pointing-data").text)["panels"]
    assert [panel["held"] for panel in panels] == [["Resin A"], ["Resin B"]]


def test_pointing_keeps_to_what_a_panel_shows() -> None:
    definition = Definition.model_validate(tables(factors=[PH, LOAD_KEYS, RESIN_KEYS]))
    rows = [(p, q, r) for p in (4.5, 5.0) for q in (5.0, 10.0, 40.0) for r in ("Alpha", "Beta")]
    grid = pd.DataFrame(rows, columns=["ph", "load", "resin"])
    grid["probability"] = np.linspace(0.0, 1.0, len(grid))
    left = {"x": "ph", "y": "load", "x_ends": (4.4, 5.1), "y_ends": (4.0, 50.0), "x_log": False}
    box = {"left": 0.1, "top": 0.2, "width": 0.5, "height": 0.6}
    frame = Frame(**left, **box, y_log=True, held={"resin": "Beta"})  # type: ignore[arg-type]
    shown = Drawn(name="map", title="", says="", svg="", png=b"", frames=(frame,))
    window = replace(NO_WINDOW, grid=grid[(grid["ph"] < 5.0) | (grid["load"] < 40.0)])
    (panel,) = pointed_at(definition, window, shown)["panels"]
    assert panel["box"] == [0.1, 0.2, 0.5, 0.6]
    assert (panel["x"]["log"], panel["y"]["log"]) == (False, True)
    assert panel["held"] == ["resin Beta"]
    assert panel["y"]["texts"] == ["load 5", "load 10", "load 40"]
    # Rows of load, columns of pH; the condition that no limit allows is not among the grid's.
    assert panel["p"] == [[91, 636], [273, 818], [455, None]]
    assert pointed_at(definition, None, shown) == {}


@pytest.mark.usefixtures("_one_figure")
def test_without_protein_for_a_plate_the_page_is_made_all_the_same(tmp_path: Path) -> None:
    toml = PLAIN.replace("available_mg = 40", "available_mg = 13")
    page, read = _said(
        tmp_path / "s", {"study.toml": toml, "plates/plate-01.csv": plate()}, wells=6
    )
    assert page.basis.plan is None
    assert page.facts["answer"][2].startswith("No next plate is planned: ")
    assert page.facts["unplanned"][0] in read.one("section", id="next").text
