"""`muntin assess` says the hand-over of a window, and tells it as JSON."""

from __future__ import annotations

import json
from pathlib import Path

from tests.report.studies import ONE_FACTOR, one_factor_plate, small, write
from tests.test_cli import run


def test_assess_tells_the_hand_over(tmp_path: Path) -> None:
    study = small(tmp_path / "study")
    shown = run("assess", study, "--surrogate", "quadratic")
    assert shown.exit_code == 0, shown.stderr
    told = " ".join(shown.stdout.split())
    facts = json.loads(run("assess", study, "--surrogate", "quadratic", "--json").stdout)
    handed, window = facts["handover"], facts["window"]
    assert f"Set point: {handed['sentence']}." in told
    assert told.count("Ranges that hold together") == 1
    assert "of new wells pass at all of these conditions at once is" in told
    assert "To the edge, one factor moved at a time:" in told
    assert "Repeat the set point before believing it" in told
    assert handed["box"]["ranges"] == window["ranges"]
    assert handed["box"]["least"] >= window["required_probability"]
    assert handed["setpoint"].items() <= window["set_point"].items()
    assert {row["factor"] for row in handed["edge"]} <= set(handed["setpoint"])


def test_before_any_reading_nothing_is_handed_over(tmp_path: Path) -> None:
    study = write(tmp_path / "empty", {"study.toml": ONE_FACTOR})
    facts = json.loads(run("assess", study, "--json").stdout)
    assert "handover" not in facts
    assert facts["window"] is None


def test_one_factor_is_handed_over(tmp_path: Path) -> None:
    study = write(
        tmp_path / "one", {"study.toml": ONE_FACTOR, "plates/plate-01.csv": one_factor_plate()}
    )
    result = run("assess", study, "--surrogate", "quadratic", "--json")
    assert result.exit_code == 0, result.stderr
    assert json.loads(result.stdout)["handover"]["seed"] == 1
