"""What test wells take, counted by hand."""

import numpy as np
import pandas as pd
import pytest

from muntin.bench.layout import default_controls
from muntin.bench.outlay import Outlay
from muntin.bench.protein import protein_needed_mg
from muntin.record import StudyFaults
from tests.studies import LOAD, PH, SALT, read, spread, written

PROTEIN = {"available_mg": 100.0, "reserved_mg": 10.0, "per_well_mg": 0.5}
PLATE = read(spread([PH, SALT], 12))
TIMES = {"days_per_plate": 2.0, "assays_per_well": 3.0, "assays_per_day": 48.0}


def outlay(folder, plates=(), load=None, **given):
    """The outlay of a plan of four bridging wells, the usual controls and 12 test wells."""
    study = written(folder, plates, **given)
    definition = study.definition
    controls = default_controls(definition.plate, len(definition.free_wells))
    roles = ["bridge"] * 4 + ["test"] * 12 + [r for r, n in controls.items() for _ in range(n)]
    return Outlay(study, pd.DataFrame({"role": roles, **(load or {})}), bridging=4)


def test_rooms_beside_bridging_wells_and_eight_controls(tmp_path):
    rooms = outlay(tmp_path).rooms
    assert (rooms.first, rooms.further) == (96 - 4 - 8, 96 - 4 - 8)
    large = outlay(tmp_path / "384", study={"plate": 384}).rooms
    assert (large.first, large.further) == (384 - 4 - 16, 384 - 4 - 16)


def test_a_part_used_plate_is_followed_by_whole_ones(tmp_path):
    # 12 wells are free, of which a quarter may hold controls.
    rooms = outlay(tmp_path, plan={"free_wells": "A1:A12"}).rooms
    assert (rooms.first, rooms.further) == (12 - 4 - 3, 84)


def test_all_of_it_counted_by_hand(tmp_path):
    table = outlay(tmp_path, protein=PROTEIN, plan=TIMES).table((0, 6, 84, 96))
    assert list(table.columns) == ["wells", "plates", "mg", "assays", "days"]
    assert list(table["plates"]) == [0, 1, 1, 2]
    # Bridging wells, four loads and two wells without resin are given protein, blanks are not.
    assert list(table["mg"]) == [0.0, 0.5 * (6 + 10), 0.5 * (84 + 10), 0.5 * (96 + 20)]
    assert list(table["assays"]) == [0.0, 3.0 * (6 + 4), 3.0 * (84 + 4), 3.0 * (96 + 8)]
    waits = [0.0, 30 / 48, 264 / 48, 312 / 48]
    assert list(table["days"]) == pytest.approx([0.0, 2.0 + waits[1], 2.0 + waits[2], 4 + waits[3]])


def test_wells_beyond_the_plan_take_what_its_own_take_on_average(tmp_path):
    """Four bridging wells at 5 mg/mL, 12 test wells half at 2, half at 10, in wells of 0.1 mL."""
    load = {"load": [5.0] * 4 + [2.0, 10.0] * 6 + [np.nan] * 8}
    protein = {"available_mg": 1000.0, "load_factor": "load", "resin_ul": 100.0}
    out = outlay(tmp_path, factors=[LOAD, SALT], protein=protein, load=load)
    controls = 6 * protein_needed_mg(out.study, ["load"])
    assert out.mg(0) == 0.0
    assert out.mg(3) == pytest.approx(4 * 0.5 + controls + 0.2 + 1.0 + 0.2)
    assert out.mg(14) == pytest.approx(4 * 0.5 + controls + 12 * 0.6 + 2 * 0.6)


@pytest.mark.parametrize(
    ("plan", "columns"),
    [
        ({}, []),
        ({"days_per_plate": 2.0}, ["days"]),
        ({"assays_per_well": 1.0}, ["assays"]),
        ({"assays_per_well": 1.0, "assays_per_day": 96.0}, ["assays", "days"]),
    ],
)
def test_what_the_study_does_not_say_is_not_shown(tmp_path, plan, columns):
    assert list(outlay(tmp_path, plan=plan).table((0, 6)).columns) == ["wells", "plates", *columns]


def test_numbers_of_wells_that_protein_allows(tmp_path):
    assert outlay(tmp_path / "free").counts(24) == (0, 6, 12, 24, 48, 96)
    assert outlay(tmp_path / "more").counts(30) == (0, 6, 12, 24, 30, 48, 96)
    # 90 mg less 12 wells run are 84 mg: 48 wells take 29 mg, 96 take 58.
    ample = outlay(tmp_path / "ample", [PLATE], protein=PROTEIN)
    assert ample.counts(24) == (0, 6, 12, 24, 48, 96)
    scarce = {**PROTEIN, "available_mg": 10.0 + 6.0 + 29.0}
    assert outlay(tmp_path / "scarce", [PLATE], protein=scarce).counts(24) == (0, 6, 12, 24, 48)
    less = {**scarce, "available_mg": 10.0 + 6.0 + 28.9}
    assert outlay(tmp_path / "less", [PLATE], protein=less).counts(10) == (0, 6, 10, 12, 24)


def test_assays_a_day_need_assays_a_well(tmp_path):
    with pytest.raises(StudyFaults) as caught:
        written(tmp_path, plan={"assays_per_day": 96.0})
    assert caught.value.lines() == [
        "study.toml, plan, assays_per_day: 96 needs assays_per_well beside it"
    ]
