"""Uptake tables: what is read, and what is said where it cannot be."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from muntin.assay.uptake_table import Curve, planned_time, read_curves
from muntin.record.faults import StudyFaults
from muntin.record.uptake_keys import UptakeKeys

KEYS = UptakeKeys(feed_mg_per_ml=2.0, phase_ratio=30.0)


def read(folder: Path, text: str, keys: UptakeKeys = KEYS, name: str = "curve.csv") -> Curve:
    (folder / "uptake").mkdir(exist_ok=True)
    (folder / "uptake" / name).write_text(text, encoding="utf-8")
    (curve,) = read_curves(folder, keys)
    return curve


def faults(folder: Path, text: str, keys: UptakeKeys = KEYS) -> list[str]:
    with pytest.raises(StudyFaults) as caught:
        read(folder, text, keys)
    return caught.value.lines()


def test_loads_as_they_stand_in_the_order_of_time(tmp_path: Path) -> None:
    found = read(tmp_path, "time_min,load,sd\n60,31.5,0.8\n5,6.2,\n0,0.1,0.3\n")
    assert found.times.tolist() == [0.0, 5.0, 60.0]
    assert found.loads.tolist() == [0.1, 6.2, 31.5]
    assert found.sds.tolist() == [0.3, 0.0, 0.8]
    assert found.distinct.tolist() == [5.0, 60.0]
    assert found.offered == 60.0
    assert found.notices == ()


def test_liquid_readings_become_loads(tmp_path: Path) -> None:
    found = read(tmp_path, "time_min;liquid;sd\n5;1,8;0,01\n60;0,95;0,02\n")
    assert found.loads == pytest.approx([6.0, 31.5])
    assert found.sds == pytest.approx([0.3, 0.6])


def test_a_limit_of_the_liquid_is_the_other_limit_of_the_load(tmp_path: Path) -> None:
    text = "time_min,liquid\n5,>1.9\n30,1.2\n60,<0.05\n"
    found = read(tmp_path, text)
    assert found.loads == pytest.approx([3.0, 24.0, 58.5])
    assert found.sides.tolist() == [-1.0, 0.0, 1.0]
    text = "time_min,load\n5,<3\n30,24\n60,≥58.5\n"
    assert read(tmp_path, text).sides.tolist() == [-1.0, 0.0, 1.0]
    told = "uptake/curve.csv: 2 readings censored (< or >), used as such"
    assert found.notices == (told,)


def test_what_is_left_out_or_awaited_is_counted(tmp_path: Path) -> None:
    text = (
        "time_min,load,well,exclude\n5,6,A1,\n10,99,A2,pipetted twice\n20,,A3,\n60,31,A4,\n90,,A5,"
        "\n"
    )
    found = read(tmp_path, text)
    assert found.times.tolist() == [5.0, 60.0]
    assert found.notices == (
        "uptake/curve.csv: columns not used: well",
        "uptake/curve.csv: 1 reading left out with a reason",
        "uptake/curve.csv: 2 readings awaited",
    )


BAD = {
    "heading_time": (
        "time,load\n5,6\n60,31\n",
        ["uptake/curve.csv: has no column time_min (did you mean its column time?)"],
    ),
    "heading_load": (
        "time_min,loads\n5,6\n60,31\n",
        ["uptake/curve.csv: has no column load (did you mean its column loads?)"],
    ),
    "heading_liquid": (
        "time_min,liquid_mg\n5,6\n60,31\n",
        ["uptake/curve.csv: has no column liquid (did you mean its column liquid_mg?)"],
    ),
    "heading_none": (
        "time_min,area\n5,6\n60,31\n",
        [
            "uptake/curve.csv: has no column load (expected header: time_min,load or "
            "time_min,liquid; if you have it sd, exclude)"
        ],
    ),
    "both": (
        "time_min,load,liquid\n5,6,1.8\n60,31,0.9\n",
        ["uptake/curve.csv: load and liquid are both there; keep the one that was measured"],
    ),
    "cells": (
        "time_min,load,sd,exclude\n5,six,0,\n-1,7,x,yes\n,31,,\n60,32,,\n",
        [
            "uptake/curve.csv, row 3, column time_min: -1 must be at least 0",
            "uptake/curve.csv, row 4, column time_min: is empty; a reading needs its time in min",
            'uptake/curve.csv, row 3, column sd: "x" is not a number',
            "uptake/curve.csv, row 2, column sd: 0 must lie above 0 (leave it empty where it is "
            "not known)",
            'uptake/curve.csv, row 2, column load: "six" is not a number',
            'uptake/curve.csv, row 3, column exclude: "yes" is not a reason (say in words why, '
            'such as "pipetted twice", or leave the cell empty)',
        ],
    ),
    "one_time": (
        "time_min,load\n0,0\n60,31\n60,30\n",
        [
            "uptake/curve.csv: has readings at 1 time above 0; a curve needs 2, a law 4 or more",
        ],
    ),
    "no_rows": (
        "time_min,load\n",
        [
            "uptake/curve.csv: has readings at 0 times above 0; a curve needs 2, a law 4 or more",
        ],
    ),
}


@pytest.mark.parametrize("name", list(BAD))
def test_faults_are_all_named(tmp_path: Path, name: str) -> None:
    text, lines = BAD[name]
    assert faults(tmp_path, text) == lines


def test_liquid_needs_feed_and_phase_ratio(tmp_path: Path) -> None:
    text = "time_min,liquid\n5,1.8\n60,0.95\n"
    end = "in [uptake] of study.toml to tell the load"
    start = "uptake/curve.csv, column liquid: needs"
    assert faults(tmp_path, text, UptakeKeys()) == [f"{start} feed_mg_per_ml and phase_ratio {end}"]
    keys = UptakeKeys(feed_mg_per_ml=2.0)
    assert faults(tmp_path, text, keys) == [f"{start} phase_ratio {end}"]


def test_faults_of_all_tables_come_together(tmp_path: Path) -> None:
    (tmp_path / "uptake").mkdir()
    (tmp_path / "uptake" / "a.csv").write_text("time_min,load\n5,x\n60,2\n")
    assert len(faults(tmp_path, "time_min,load\n5,y\n60,2\n")) == 2


def test_tables_are_found_by_name_ending_or_path(tmp_path: Path) -> None:
    good = "time_min,load\n5,6\n60,31\n"
    read(tmp_path, good, name="resin-2.csv")
    (tmp_path / "uptake" / "resin-10.csv").write_text(good)
    (tmp_path / "elsewhere.csv").write_text(good)
    names = [curve.name for curve in read_curves(tmp_path, KEYS)]
    assert names == ["resin-2", "resin-10"]
    for wanted in ("resin-2", "resin-2.csv"):
        (found,) = read_curves(tmp_path, KEYS, wanted)
        assert (found.name, found.file) == ("resin-2", "uptake/resin-2.csv")
    (found,) = read_curves(tmp_path, KEYS, str(tmp_path / "elsewhere.csv"))
    assert found.name == "elsewhere"
    with pytest.raises(StudyFaults, match=r"resin-3: is no table .* \(did you mean resin-2"):
        read_curves(tmp_path, KEYS, "resin-3")


def test_a_study_without_tables_is_told_what_to_write(tmp_path: Path) -> None:
    with pytest.raises(StudyFaults) as caught:
        read_curves(tmp_path, KEYS)
    assert caught.value.lines() == [
        f"{tmp_path / 'uptake'}: holds no table of an uptake curve (write time_min,load or "
        "time_min,liquid to uptake/curve.csv)"
    ]


def test_the_planned_time_that_is_asked_for_comes_first() -> None:
    keys = UptakeKeys(planned_min=45.0)
    assert planned_time(keys, None) == 45.0
    assert planned_time(keys, 20.0) == 20.0
    assert planned_time(UptakeKeys(), None) is None
    for wrong in (0.0, -5.0, np.nan, np.inf):
        with pytest.raises(StudyFaults, match="must lie above 0 min"):
            planned_time(keys, wrong)
