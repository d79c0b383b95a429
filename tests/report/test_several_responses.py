"""What screens and JSON say of several responses."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

import muntin
from muntin.report.facts import plain, standing_facts
from muntin.report.text import check_lines, window_lines
from muntin.window.assessment import Assessment
from muntin.window.checks import Check
from tests.studies import HCP, PH, RECOVERY, SALT, read, read_hcp, spread, written


@pytest.fixture(scope="module")
def view(tmp_path_factory: pytest.TempPathFactory) -> Assessment:
    plates = [read_hcp(read(spread([PH, SALT], 20, seed), seed), seed + 9) for seed in (1, 2)]
    folder: Path = tmp_path_factory.mktemp("several")
    responses = [RECOVERY, {**HCP, "label": "HCP", "at_most": 45}]
    return muntin.assess(written(folder, plates, responses=responses), "quadratic")


def test_the_window_says_what_gives_way_first(view: Assessment) -> None:
    window = replace(view.window(), unsupported=())
    lines = window_lines(view, window)
    (line,) = (text for text in lines if text.startswith("Gives way first: "))
    assert lines[lines.index(line) - 1].startswith("Ranges that hold together: ")
    assert "Recovery, too low, below pH " in line
    assert "HCP, too high, above salt " in line
    alone = window_lines(view, replace(window, sides=()))
    assert alone == [text for text in lines if text != line]


def test_facts_hold_sides_and_correlations(view: Assessment) -> None:
    window = replace(view.window(), unsupported=())
    facts = plain(standing_facts(view, window))
    (pair,) = facts["together"]
    assert (pair["first"], pair["second"], pair["wells"]) == ("recovery", "hcp", 40)
    assert pair["low"] < pair["rho"] < pair["high"]
    sides = facts["window"]["sides"]
    assert [(s["factor"], s["end"]) for s in sides] == [
        ("ph", "low"),
        ("ph", "high"),
        ("salt", "low"),
        ("salt", "high"),
    ]
    assert sides[3]["response"] == "hcp"
    assert sides[3]["fails"] == "high"
    assert 0.0 < sides[3]["probability"] < 0.9
    assert sides[1]["beyond"] is None


def test_how_far_readings_move_together_is_said_where_responses_are_few() -> None:
    together = Check("readings together", True, False, "Recovery and HCP: move together (0.6).")
    two, many = {"a": "A", "b": "B"}, {name: name for name in "abcd"}
    assert check_lines((together,), (), two) == [
        "Passed, 1 of 1: readings together.",
        together.sentence,
    ]
    assert check_lines((together,), (), many) == ["Passed, 1 of 1: readings together."]
