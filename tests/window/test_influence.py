"""Influence of a study's factors: columns, units, scales, and what the user can get wrong."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import muntin
from muntin.record.faults import StudyFaults
from muntin.window import influence
from tests.studies import (
    HCP,
    LOAD,
    PH,
    RECOVERY,
    RESIN,
    SALT,
    SHIFT,
    changed,
    read,
    read_shift,
    spread,
    written,
)

SHARES = ["first", "first_low", "first_high", "total", "total_low", "total_high"]
RESPONSES = [SHIFT, RECOVERY, HCP]


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    """Recovery rises with pH and salt; shift falls with pH only; HCP is awaited."""
    plate = read_shift(read(spread([PH, SALT], 24)))
    study = written(tmp_path_factory.mktemp("study"), [plate], responses=RESPONSES)
    return muntin.assess(study, surrogate="gp", seed=3)


def test_a_row_a_factor_and_intervals_around_shares(view):
    table = view.influence(draws=50)
    assert table.index.name == "factor"
    assert list(table.index) == ["ph", "salt"]
    assert list(table.columns) == SHARES
    for share in ("first", "total"):
        assert (table[f"{share}_low"] < table[share]).all()
        assert (table[share] < table[f"{share}_high"]).all()
    assert (table["total"] > table["first"]).all()


def test_intervals_hold_95_per_cent_of_the_draws(view):
    table = view.influence("recovery", draws=200, seed=5)
    effects = influence.surface_effects(
        view.surfaces["recovery"], influence._grid(view.study), 200, np.random.default_rng(5)
    )
    inside = (effects.first > table["first_low"].to_numpy()) & (
        effects.first < table["first_high"].to_numpy()
    )
    assert inside.sum(axis=0).tolist() == [190, 190]
    assert table["total"].to_numpy() == pytest.approx(effects.total.mean(axis=0))


def test_same_seed_same_numbers(view):
    table = view.influence("shift", draws=20)
    pd.testing.assert_frame_equal(table, view.influence("shift", draws=20, seed=view.seed))
    assert not table.equals(view.influence("shift", draws=20, seed=4))


def test_the_first_judged_response_that_was_read_is_meant_where_none_is_named(view):
    tracked = {k: v for k, v in SHIFT.items() if k not in ("at_least", "at_most")}
    other = changed(view, responses=[tracked, RECOVERY, HCP])
    kept = {"negligible": 0.1, "draws": 20}
    pd.testing.assert_frame_equal(view.influence(**kept), view.influence("shift", **kept))
    pd.testing.assert_frame_equal(other.influence(**kept), view.influence("recovery", **kept))


def test_only_the_factor_that_moves_the_response_is_not_negligible(view):
    """Shift falls by 4.5 over pH and does not change with salt; noise 0.2."""
    chance = view.influence("shift", negligible=1.0)["p_negligible"]
    assert chance["ph"] == 0.0
    assert chance["salt"] > 0.9
    growing = [
        view.influence("shift", negligible=size, draws=100)["p_negligible"]["ph"]
        for size in (3.5, 4.5, 5.5)
    ]
    assert growing[0] == 0.0
    assert 0.0 < growing[1] < 1.0
    assert growing[2] == 1.0


def test_sizes_are_in_the_unit_of_the_response(view):
    per_cent = {**RECOVERY, "unit": "%", "at_least": 80}
    other = changed(view, responses=[SHIFT, per_cent, HCP])
    effects = influence.surface_effects(
        view.surfaces["recovery"], influence._grid(view.study), 60, np.random.default_rng(7)
    )
    size = float(np.quantile(effects.change[:, 0], 0.25))
    for asked, by in ((view, 1.0), (other, 100.0)):
        table = asked.influence("recovery", by * size, draws=60, seed=7)
        assert table["p_negligible"]["ph"] == pytest.approx(0.25)


def test_limits_and_narrower_plans_are_left_aside(view):
    narrow = {**PH, "plan_low": 6.0}
    limits = [{"allow": "salt <= 200"}]
    other = changed(view, factors=[narrow, SALT], responses=RESPONSES, limits=limits)
    pd.testing.assert_frame_equal(other.influence(draws=20), view.influence(draws=20))


def test_a_factor_on_a_log_scale_varies_evenly_on_it(tmp_path):
    """y = ln(load) and a pH term of the same coded size: half of the variance each."""
    wells = spread([LOAD, PH], 32)
    half = np.log(40.0 / 5.0) / 2.0
    noise = 0.01 * np.random.default_rng(1).standard_normal(32)
    y = np.log(wells["load"].astype(float)) + half * (wells["ph"].astype(float) - 6.0) / 1.5
    study = written(
        tmp_path, [wells.assign(shift=y + noise)], factors=[LOAD, PH], responses=[SHIFT]
    )
    table = muntin.assess(study, surrogate="quadratic").influence()
    assert table["first"].to_numpy() == pytest.approx([0.5, 0.5], abs=0.02)
    assert table["total"].to_numpy() == pytest.approx([0.5, 0.5], abs=0.02)


def test_choices_are_equally_likely(tmp_path):
    """Two levels of three alike and one 3 higher: variance 2, beside 3/2 from pH's slope."""
    wells = spread([PH, RESIN], 40)
    noise = 0.01 * np.random.default_rng(1).standard_normal(40)
    y = 3.0 * (wells["resin"] == "Beta") + np.sqrt(4.5) * (wells["ph"].astype(float) - 6.0) / 1.5
    study = written(
        tmp_path, [wells.assign(shift=y + noise)], factors=[PH, RESIN], responses=[SHIFT]
    )
    table = muntin.assess(study, surrogate="quadratic").influence()
    assert table["first"].to_numpy() == pytest.approx([1.5 / 3.5, 2.0 / 3.5], abs=0.02)


@pytest.mark.parametrize(
    ("asked", "line"),
    [
        ({"response": "hcp"}, 'influence, response: "hcp" has not been read yet'),
        (
            {"response": "recovry"},
            'influence, response: "recovry" is not a response (did you mean "recovery"?)',
        ),
        ({"negligible": 0.0}, "influence, negligible: 0 is not above 0"),
        ({"negligible": -0.1}, "influence, negligible: -0.1 is not above 0"),
        ({"negligible": np.nan}, "influence, negligible: nan is not above 0"),
    ],
)
def test_what_cannot_be_told_is_said(view, asked, line):
    with pytest.raises(StudyFaults) as faults:
        view.influence(**asked)
    assert faults.value.lines() == [line]


def test_nothing_is_told_before_the_first_reading(view):
    with pytest.raises(StudyFaults) as faults:
        replace(view, stacks={}).influence()
    assert faults.value.lines() == ["influence, response: none has been read yet"]


def test_factors_with_too_many_combinations_are_refused(view, monkeypatch):
    monkeypatch.setattr(influence, "_LARGEST", 440)
    with pytest.raises(StudyFaults) as faults:
        view.influence()
    assert faults.value.lines() == ["influence, factors: 441 makes more combinations than 440"]


def test_one_draw_is_too_few(view):
    with pytest.raises(ValueError, match=r"^draws must be at least 2, not 1$"):
        view.influence(draws=1)
