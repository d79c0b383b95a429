"""How study, assessment, window and plan show themselves in a notebook."""

from __future__ import annotations

import re
from dataclasses import replace
from html import unescape
from html.parser import HTMLParser
from pathlib import Path

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.bench.plan import propose
from muntin.record import open_study
from muntin.record.notebook import card
from muntin.window.assessment import Assessment, assess
from tests.report.studies import STUDY, plate, write


@pytest.fixture
def view(tmp_path: Path) -> Assessment:
    files = {"study.toml": STUDY, "plates/plate-01.csv": plate()}
    return assess(open_study(write(tmp_path, {**files})), surrogate="quadratic")


class Tags(HTMLParser):
    """Opens and closes counted, so that what is given as text can add none."""

    def __init__(self) -> None:
        super().__init__()
        self.opened: list[str] = []
        self.text: list[str] = []

    def handle_starttag(self, tag: str, attrs: object) -> None:
        self.opened.append(tag)

    def handle_data(self, data: str) -> None:
        self.text.append(data)


def read(html: str) -> Tags:
    found = Tags()
    found.feed(html)
    found.close()
    return found


def words(html: str) -> str:
    return " ".join(unescape(re.sub(r"<[^>]+>", " ", html)).split())


def test_study_says_what_it_asks_and_holds(view: Assessment) -> None:
    said = words(view.study._repr_html_())
    for part in (
        "Small invented study",
        "pH: 4.5 to 7.5, steps of 0.5",
        "Salt: 50 to 450 mM, steps of 50",
        "Recovery: at least 0.8",
        "1 plate, 12 wells, 0 controls",
        "Recovery: 12 read",
    ):
        assert part in said


def test_study_without_a_plate(tmp_path: Path) -> None:
    said = words(open_study(write(tmp_path, {"study.toml": STUDY}))._repr_html_())
    assert "Run no plate yet" in said
    assert "Read" not in said


def test_assessment_makes_no_window_to_show_itself(view: Assessment) -> None:
    said = words(view._repr_html_())
    assert "Recovery: 12 readings; quadratic 100 %" in said
    assert "Window view.window() makes it" in said
    assert not {"_window", "_checks"} & set(vars(view))
    share = view.window().share
    assert f"Window {100 * share:.1f} % of the range" in words(view._repr_html_())
    assert "checks, none failed that is serious" in words(view._repr_html_())


def test_window_says_set_point_and_ranges(view: Assessment) -> None:
    window = view.window()
    said = words(window._repr_html_())
    best = "set point" if window.share else "best so far"
    assert f"factor {best} low high" in said
    assert f"ph {window.setpoint['ph']:g} " in said
    assert f"{window.setpoint['probability']:.3f}" in said
    refused = replace(window, unsupported=("The plates differ.",))
    assert words(refused._repr_html_()).endswith("Not supported by the data The plates differ.")


def test_plan_shows_its_first_wells_and_the_forecast(view: Assessment) -> None:
    plan = propose(view, wells=14)
    said = words(plan._repr_html_())
    assert said.startswith("Plan of plate-02 Wells ")
    run = plan.wells[plan.wells["role"].isin(["test", "bridge"])]
    assert f"the first 12 of {len(run)} wells to run" in said
    assert all(f" {well} " in said for well in run["well"].head(12))
    assert f"{plan.forecast['wrong_share'].iloc[0]:.4g}" in said


def test_in_a_console_each_is_a_line(view: Assessment) -> None:
    folder = str(view.study.folder)
    assert repr(view.study) == f"Study('Small invented study', 1 plate, 12 wells, {folder!r})"
    said = "Assessment('Small invented study', quadratic, engine fast, seed 1: recovery)"
    assert repr(view) == said
    window = view.window()
    point = f"ph {window.setpoint['ph']:g}, salt {window.setpoint['salt']:g}"
    best = "set point" if window.share else "best so far"
    assert repr(window) == f"Window({100 * window.share:.1f} % of the range; {best}: {point})"
    assert repr(propose(view, wells=5)).startswith("Plan('plate-02', ")


EVIL = '<script>alert("x")</script> & <b>'


def test_what_is_given_is_text_and_never_html(tmp_path: Path) -> None:
    text = STUDY.replace('"Small invented study"', f"'{EVIL}'").replace('"Salt"', f"'{EVIL}'")
    study = open_study(write(tmp_path, {"study.toml": text, "plates/plate-01.csv": plate()}))
    found = read(study._repr_html_())
    assert not {"script"} & set(found.opened)
    assert EVIL in "".join(found.text)


TEXT = st.text() | st.sampled_from(["<b>x</b>", "<script>", "</td>", "a & b", "<img src=x>"])


@given(TEXT, TEXT, st.lists(TEXT, max_size=3), TEXT)
def test_a_card_has_the_tags_of_its_shape_alone(
    title: str, head: str, lines: list[str], cell: str
) -> None:
    table = pd.DataFrame({"a": [cell], "b": [1.5]})
    plain = read(card("t", [("h", ["x"] * len(lines))] if any(lines) else [], table))
    found = read(card(title, [(head, lines)], table.assign(a="y")))
    both = read(card(title, [(head, lines)], table))
    assert found.opened == both.opened
    assert sorted(set(both.opened) - {"br"}) == sorted(set(plain.opened) - {"br"})
