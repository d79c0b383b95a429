"""Conditions that a new plate may run."""

import numpy as np
import pandas as pd
import pytest

from muntin.design.candidates import (
    RunCondition,
    candidate_frame,
    plannable,
    run_conditions,
)
from muntin.record.definition import Definition, definition_faults
from muntin.window.grid import judged_grid
from tests.studies import LOAD, PH, RESIN, SALT, TIME, read, spread, tables, written


def definition(**given):
    made = Definition.model_validate(tables(**given))
    assert definition_faults(made) == []
    return made


def on_steps(values, factor):
    low, step = factor["low"], factor["step"]
    away = (np.asarray(values, dtype=float) - low) / step
    return np.abs(away - np.round(away)) < 1e-9


# What was run.


def test_run_conditions_go_by_target_and_are_told_once(tmp_path):
    plate = pd.DataFrame(
        {
            "well": ["A1", "A2", "A3", "A4", "B1", "B2", "B3"],
            "role": ["test", "bridge", "test", "reference", "test", "blank", "test"],
            "ph": [5.0, 5.5, 5.0, 6.0, 6.5, np.nan, 7.0],
            "ph_measured": [5.04, np.nan, 4.97, np.nan, np.nan, np.nan, np.nan],
            "salt": [100, 100, 100, 200, 300, np.nan, 400],
            "recovery": [0.2, 0.3, 0.25, 0.5, 0.9, 0.0, np.nan],
            "exclude": ["", "", "", "", "pipetted twice", "", ""],
        }
    )
    # Of the others B1 was left out, B2 is a blank and B3 is awaited.
    again = pd.DataFrame({"ph": [5.5, 6.5], "salt": [100, 300], "recovery": [0.31, 0.92]})
    study = written(tmp_path / "study", [plate, again.assign(role="test")])
    assert run_conditions(study) == (
        RunCondition((5.0, 100.0), (("plate-01", "A1"), ("plate-01", "A3")), bridged=False),
        RunCondition((5.5, 100.0), (("plate-01", "A2"), ("plate-02", "A1")), bridged=True),
        RunCondition((6.0, 200.0), (("plate-01", "A4"),), bridged=False),
        RunCondition((6.5, 300.0), (("plate-02", "A2"),), bridged=False),
    )


def test_void_plates_were_not_run(tmp_path):
    plates = [read(spread([PH, SALT], 4, seed), seed) for seed in (1, 2)]
    folder = tmp_path / "study"
    (folder / "plates").mkdir(parents=True)
    (folder / "plates" / "plate-01.toml").write_text('void = "the feed was warm"\n')
    study = written(folder, plates)
    names = {plate for run in run_conditions(study) for plate, _ in run.wells}
    assert names == {"plate-02"}


# Candidates.


def test_small_ranges_give_every_bench_step():
    frame = candidate_frame(definition(factors=[PH, RESIN, SALT]), ())
    assert len(frame) == 7 * 3 * 9
    assert not frame.duplicated().any()
    assert set(frame["ph"]) == {4.5, 5.0, 5.5, 6.0, 6.5, 7.0, 7.5}
    assert set(frame["resin"]) == {"Alpha", "Beta", "Gamma"}


def test_wide_ranges_are_thinned_on_bench_steps():
    fine = [{**PH, "step": 0.01}, {**SALT, "step": 1}]
    frame = candidate_frame(definition(factors=fine), ())
    assert 1000 < len(frame) <= 2000
    for factor in fine:
        values = frame[factor["name"]]
        assert on_steps(values, factor).all()
        assert values.min() == factor["low"]
        assert values.max() == factor["high"]


def test_beyond_three_factors_candidates_are_scattered_on_bench_steps():
    factors = [PH, SALT, LOAD, TIME]
    frame = candidate_frame(definition(factors=factors), ())
    assert 500 < len(frame) <= 2000
    for factor in factors:
        assert on_steps(frame[factor["name"]], factor).all()
        assert frame[factor["name"]].between(factor["low"], factor["high"]).all()


def test_plan_ranges_and_choices_narrow_the_candidates():
    factors = [
        {**PH, "plan_low": 5.2, "plan_high": 6.5},
        SALT,
        {**RESIN, "plan_choices": ["Alpha", "Gamma"]},
    ]
    frame = candidate_frame(definition(factors=factors), ())
    assert set(frame["ph"]) == {5.5, 6.0, 6.5}
    assert set(frame["resin"]) == {"Alpha", "Gamma"}
    assert len(frame) == 3 * 9 * 2


def test_limits_hold_for_all_candidates():
    limits = [{"allow": "salt <= 450 - 100 * (ph - 5)"}, {"allow": "ph > 4.6"}]
    frame = candidate_frame(definition(limits=limits), ())
    assert len(frame) > 10
    assert (frame["salt"] <= 450.0 - 100.0 * (frame["ph"] - 5.0)).all()
    assert (frame["ph"] > 4.6).all()
    whole = candidate_frame(definition(), ())
    inside = (whole["salt"] <= 450.0 - 100.0 * (whole["ph"] - 5.0)) & (whole["ph"] > 4.6)
    assert len(frame) == inside.sum()


def run(*values, wells=(("plate-01", "A1"),), bridged=False):
    return RunCondition(values, wells, bridged)


def test_conditions_that_were_run_come_first_where_they_may_be_run_again():
    # Thinning may drop a level that was run; it stays a candidate, for repeats.
    fine = [{**PH, "step": 0.01, "plan_low": 5.0}, {**SALT, "step": 1}]
    inside, low, odd, outside = (
        run(5.07, 133.0),
        run(4.8, 133.0),
        run(5.075, 133.0),
        run(7.0, 449.0),
    )
    made = definition(factors=fine, limits=[{"allow": "salt < 440"}])
    frame = candidate_frame(made, (inside, low, odd, outside))
    assert tuple(frame.iloc[0]) == (5.07, 133.0)
    assert not frame.duplicated().any()
    again = set(frame.itertuples(index=False, name=None))
    assert not again & {low.values, odd.values, outside.values}


def test_choices_keep_the_columns_apart():
    made = definition(factors=[PH, {**RESIN, "plan_choices": ["Beta", "Gamma"]}])
    frame = candidate_frame(made, (run(5.0, "Gamma"), run(5.5, "Alpha")))
    assert tuple(frame.iloc[0]) == (5.0, "Gamma")
    assert "Alpha" not in set(frame["resin"])
    assert frame["ph"].dtype == float
    assert len(frame) == 14


def test_forbidden_conditions_are_no_candidates_but_stay_judged():
    precipitates = {"conditions": "salt >= 300 and ph < 6", "because": "it precipitates"}
    made = definition(forbidden=[precipitates])
    frame = candidate_frame(made, (run(5.0, 400.0), run(6.5, 400.0)))
    assert not ((frame["salt"] >= 300) & (frame["ph"] < 6)).any()
    assert len(frame) == 7 * 9 - 3 * 4
    grid, _ = judged_grid(made)
    assert len(grid) == 7 * 9


def test_what_is_left_between_forbidden_conditions_is_found_on_every_step():
    # Only pH 6.01 is left, which a thinned grid of 3 pH by 0.01 does not hold.
    fine = [{**PH, "step": 0.01}, {**SALT, "step": 1}]
    rules = [{"conditions": "ph < 6.005 or ph > 6.015", "because": "no other stock is left"}]
    frame = candidate_frame(definition(factors=fine, forbidden=rules), ())
    assert set(frame["ph"]) == {6.01}
    assert frame["salt"].nunique() > 50


def test_plannable_says_which_rows_may_be_run():
    made = definition(
        factors=[{**PH, "plan_high": 6.5}, {**RESIN, "plan_choices": ["Alpha", "Beta"]}],
        limits=[{"allow": "ph >= 5"}],
    )
    frame = pd.DataFrame(
        {
            "ph": [5.0, 5.5, 5.25, 4.5, 7.0, 6.5, 0.1 + 0.2 + 5.2],
            "resin": ["Alpha", "Gamma", "Alpha", "Alpha", "Beta", "Beta", "Beta"],
        }
    )
    assert plannable(made, frame).tolist() == [True, False, False, False, False, True, True]


@pytest.mark.parametrize(
    ("factor", "levels"),
    [
        ({**PH, "per_plate": 1}, {6.0}),
        ({**PH, "per_plate": 2}, {4.5, 7.5}),
        ({**PH, "per_plate": 3}, {4.5, 6.0, 7.5}),
        ({**PH, "per_plate": 3, "plan_low": 5.5}, {5.5, 6.5, 7.5}),
        ({**PH, "per_plate": 20}, {4.5, 5.0, 5.5, 6.0, 6.5, 7.0, 7.5}),
    ],
)
def test_an_opening_plate_has_few_levels_evenly_over_the_range(factor, levels):
    made = definition(factors=[factor, SALT])
    opening = candidate_frame(made, ())
    assert set(opening["ph"]) == levels
    assert opening["salt"].nunique() == 9
    later = candidate_frame(made, (run(6.0, 100.0),))
    assert len(later) > len(opening) or len(levels) == 7
