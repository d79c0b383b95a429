"""Screens of the terminal."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import pandas as pd
import pytest

from muntin.record import open_study
from muntin.report.plan_text import plan_table
from muntin.report.text import check_lines, few, sheet, window_lines
from muntin.window.assessment import Assessment, assess
from muntin.window.checks import Check
from muntin.window.window import Window
from tests.report.shown import shown
from tests.report.studies import STUDY, small

GOOD = Check("coverage", True, True, "Nine of ten readings lie inside.")
BAD = Check("integration", False, True, "Averages are unreliable.")
NOTE = Check("plates", False, False, "One plate cannot tell.")


@pytest.fixture(scope="module")
def view(tmp_path_factory: pytest.TempPathFactory) -> Assessment:
    toml = STUDY.replace("kept_within = 0.1\n", "")
    study = open_study(small(tmp_path_factory.mktemp("study"), toml=toml))
    return assess(study, surrogate="quadratic")


@pytest.fixture(scope="module")
def window(view: Assessment) -> Window:
    return view.window()


def test_failures_come_first_and_what_passed_is_counted() -> None:
    assert check_lines((GOOD, NOTE, BAD)) == [
        "FAILED: Averages are unreliable.",
        "Note: One plate cannot tell.",
        "Passed, 1 of 3: coverage. Nine of ten readings lie inside.",
    ]


def test_reasons_that_stand_with_the_window_are_only_named() -> None:
    lines = check_lines((GOOD, BAD), told=(BAD.sentence,))
    assert lines[0] == "FAILED: integration; why is said with the window."


def test_few_counts_what_it_leaves_out() -> None:
    assert few(["a", "b"], 2) == ["a", "b"]
    assert few(["a", "b", "c"], 1, "see --json") == ["a", "and 2 more: see --json"]


def test_window_in_words(view: Assessment, window: Window) -> None:
    setpoint = pd.Series({"ph": 6.5, "salt": 300.0, "probability": 0.934})
    ranges = {"ph": (6.0, 7.0), "salt": (250.0, 350.0)}
    made = replace(window, share=0.25, wrong_share=0.031, setpoint=setpoint, ranges=ranges)
    assert window_lines(view, made) == [
        "Predicted operating window (plate scale): 25.0 % of the range reaches a probability of "
        "0.90 that a new well on a new plate passes.",
        "Set point: pH 6.5 and Salt 300 mM: 93.4 % of new wells pass.",
        "Ranges that hold together: pH 6.0 to 7.0 and Salt 250 to 350 mM.",
        "Share of the range we may still call wrongly: 3.1 %.",
    ]


def test_no_condition_inside(view: Assessment, window: Window) -> None:
    setpoint = pd.Series({"ph": 6.5, "salt": 300.0, "probability": 0.756})
    lines = window_lines(view, replace(window, share=0.0, setpoint=setpoint, ranges=None))
    assert "nothing of the range reaches a probability of 0.90" in lines[0]
    assert lines[1] == "The best so far: pH 6.5 and Salt 300 mM: 75.6 % of new wells pass."


def test_window_that_the_data_do_not_support_is_withheld(view: Assessment, window: Window) -> None:
    assert window_lines(view, replace(window, unsupported=(BAD.sentence,))) == [
        "Predicted operating window (plate scale): not supported by the data.",
        BAD.sentence,
    ]


def test_sheet_keeps_headings_apart_and_leaves_out_empty_sections() -> None:
    screen = sheet(
        "Title", [("One", ["first", "second"]), ("Two", []), ("Three", ["[b]third[/b]"])]
    )
    assert shown(screen) == [
        "Title",
        "One       first",
        "          second",
        "Three     [b]third[/b]",
    ]


def rows(*wells: tuple[str, float, float, float]) -> pd.DataFrame:
    names = ["well", "ph", "salt", "p_now"]
    table = pd.DataFrame(wells, columns=names).assign(role="test")
    return table.assign(reason=[f"reason of {well}" for well in table["well"]])


WELLS = rows(
    *(("A1", 6.0, 300, 0.9), ("A2", 5.0, 100, 0.2), ("A3", 5.0, 200, 0.45)),
    *(("A4", 5.0, 200, 0.45), ("A5", 6.0, 150, 0.3)),
)


Lines = Callable[..., list[str]]


@pytest.fixture
def table(view: Assessment) -> Lines:
    def lines(most: int, why: bool = True) -> list[str]:
        made = plan_table(view.study.definition, WELLS, most, why)
        return [" ".join(line.split()) for line in shown(made)]

    return lines


def test_every_condition_has_a_row_where_all_fit(table: Lines) -> None:
    assert table(4) == [
        "wells pH Salt (mM) p now why",
        "1 5.0 100 0.20 reason of A2",
        "2 5.0 200 0.45 reason of A3",
        "1 6.0 150 0.30 reason of A5",
        "1 6.0 300 0.90 reason of A1",
    ]


def test_else_conditions_are_gathered_by_level(table: Lines) -> None:
    assert table(2) == [
        "wells pH Salt (mM) p now why",
        "3 5.0 100, 200(×2) 0.20 to 0.45 reason of A3",
        "2 6.0 150, 300 0.30 to 0.90 reason of A5",
    ]


def test_else_the_first_conditions_are_shown(table: Lines) -> None:
    assert table(1) == [
        "wells pH Salt (mM) p now why",
        "1 5.0 100 0.20 reason of A2",
        "4 3 more conditions: see the plan's table",
    ]


def test_opening_plate_has_no_probabilities(table: Lines) -> None:
    assert table(2, False)[:2] == ["wells pH Salt (mM)", "3 5.0 100, 200(×2)"]
