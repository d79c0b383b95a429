"""The predicted operating window: share, ranges, set point."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.record.definition import Definition
from muntin.window.grid import judged_grid
from muntin.window.window import judge_window
from tests.studies import PH, RESIN, SALT, tables


def definition(factors=(PH, SALT), required=0.9, **given):
    study = {"required_probability": required}
    return Definition.model_validate(tables(factors=list(factors), study=study, **given))


def judge(made, judged, p_mean=None, unsupported=()):
    grid, regular = judged_grid(made)
    p = np.asarray(judged(grid) if callable(judged) else judged, dtype=float)
    return judge_window(made, grid, regular, p if p_mean is None else p_mean, p, unsupported)


def hill(ph, salt, width=1.0):
    """A probability that is highest at one condition."""

    def p(grid):
        away = ((grid["ph"] - ph) / 1.5) ** 2 + ((grid["salt"] - salt) / 200.0) ** 2
        return np.exp(-away / width**2)

    return p


def within(window, made):
    """Rows of the window's grid inside its ranges."""
    rows = np.ones(len(window.grid), dtype=bool)
    for factor in made.factors:
        low, high = window.ranges[factor.name]
        values = window.grid[factor.name]
        rows &= (values == low) if factor.choices else values.between(low, high)
    return window.grid[rows]


# Shares.


def test_share_counts_conditions_that_reach_the_required_probability():
    made = definition()
    judged = np.linspace(0.0, 1.0, 63)
    window = judge(made, judged)
    assert window.share == pytest.approx((judged >= 0.9).mean())
    assert window.grid["inside"].tolist() == (judged >= 0.9).tolist()
    np.testing.assert_array_equal(window.grid["probability"], judged)
    assert list(window.grid.columns) == ["ph", "salt", "p_mean", "probability", "inside"]
    assert window.regular


def test_a_condition_right_at_the_required_probability_lies_inside():
    window = judge(definition(required=0.75), np.full(63, 0.75))
    assert window.share == 1.0


def test_wrong_share_follows_the_process_mean_not_the_judged_probability():
    p_mean = np.linspace(0.0, 1.0, 63)
    window = judge(definition(), np.zeros(63), p_mean)
    assert window.wrong_share == pytest.approx(np.minimum(p_mean, 1.0 - p_mean).mean())
    assert window.share == 0.0


def test_reasons_against_the_window_are_kept():
    assert judge(definition(), np.ones(63), unsupported=("no",)).unsupported == ("no",)


# The set point.


def test_setpoint_is_the_condition_of_highest_probability():
    window = judge(definition(), hill(6.5, 300.0))
    assert window.setpoint.to_dict() == {"ph": 6.5, "salt": 300.0, "probability": 1.0}


def test_setpoint_lies_in_the_middle_of_a_plateau():
    made = definition()
    window = judge(made, lambda grid: np.where(grid["ph"].between(5.0, 7.0), 0.98, 0.2))
    assert window.setpoint["ph"] == 6.0
    assert window.setpoint["salt"] == 250.0


def test_setpoint_lies_in_the_middle_of_what_ties_to_half_a_per_cent():
    made = definition()

    def tilted(grid):
        p = 0.98 + 0.0045 * (grid["ph"] - 5.0) / 2.0
        return np.where(grid["ph"].between(5.0, 7.0), p, 0.2)

    assert judge(made, tilted).setpoint["ph"] == 6.0
    assert judge(made, lambda grid: 5.0 * tilted(grid) - 4.0).setpoint["ph"] > 6.0


def test_setpoint_of_choices_only():
    made = definition(factors=[RESIN])
    window = judge(made, [0.2, 0.95, 0.6])
    assert window.setpoint["resin"] == "Beta"
    assert window.ranges == {"resin": ("Beta", "Beta")}


def test_setpoint_is_given_without_a_window_too():
    window = judge(definition(), lambda grid: 0.5 * hill(5.0, 100.0)(grid))
    assert window.setpoint["probability"] == 0.5
    assert window.ranges is None


# The ranges.


def test_ranges_of_a_box_are_the_box():
    made = definition()

    def box(grid):
        return grid["ph"].between(5.5, 7.0) & grid["salt"].between(100.0, 300.0)

    window = judge(made, box)
    assert window.ranges == {"ph": (5.5, 7.0), "salt": (100.0, 300.0)}


def test_ranges_of_a_whole_range_are_the_range():
    window = judge(definition(), np.ones(63))
    assert window.ranges == {"ph": (4.5, 7.5), "salt": (50.0, 450.0)}


def test_ranges_hold_for_the_choice_of_the_setpoint():
    made = definition(factors=[RESIN, PH])
    window = judge(made, lambda g: np.where((g["resin"] == "Gamma") & (g["ph"] > 5.9), 0.99, 0.1))
    assert window.ranges == {"resin": ("Gamma", "Gamma"), "ph": (6.0, 7.5)}


def test_ranges_never_run_over_choices():
    made = definition(factors=[RESIN, PH])
    window = judge(made, lambda grid: np.where(grid["resin"] == "Alpha", 0.95, 0.99))
    assert window.ranges["resin"] in {("Beta", "Beta"), ("Gamma", "Gamma")}
    assert window.ranges["ph"] == (4.5, 7.5)


def test_ranges_grow_to_both_sides_of_a_ridge():
    # The set point lies on a diagonal ridge; a box inside it is still wider than one level.
    made = definition()
    window = judge(made, lambda g: np.where(np.abs((g["ph"] - 4.5) * 100 - g["salt"]) < 160, 1, 0))
    assert (within(window, made)["inside"]).all()
    assert all(low < high for low, high in window.ranges.values())


def test_scattered_conditions_have_no_ranges():
    grid = pd.DataFrame({"ph": [5.0, 6.0], "salt": [100.0, 200.0]})
    p = np.array([0.95, 0.99])
    window = judge_window(definition(), grid, False, p, p, ())
    assert window.ranges is None
    assert window.setpoint["ph"] in (5.0, 6.0)


FACTORS = [[PH, SALT], [SALT], [{**PH, "step": 1.0}, {**SALT, "step": 200}, RESIN]]
LIMITS = ["salt <= 500 - 60 * (ph - 4.5)", "ph >= 5"]


@settings(deadline=None, derandomize=True, max_examples=150)
@given(
    st.sampled_from(FACTORS),
    st.lists(st.sampled_from(LIMITS), unique=True),
    st.integers(0, 10_000),
    st.sampled_from([0.2, 0.6, 0.9, 0.97]),
)
def test_every_condition_inside_the_ranges_is_inside(factors, limits, seed, share):
    allow = [{"allow": text} for text in limits] if PH in factors else []
    made = definition(factors=factors, limits=allow)
    grid, _ = judged_grid(made)
    rng = np.random.default_rng(seed)
    judged = np.where(rng.random(len(grid)) < share, 0.95, 0.5)
    window = judge(made, judged)
    if window.ranges is None:
        assert window.share == 0.0
        return
    rows = within(window, made)
    assert rows["inside"].all()
    assert window.setpoint.name in rows.index
    # Nothing of the box is left out of the grid, as a limit would.
    sides = [rows[factor.name].nunique() for factor in made.factors]
    steps = [
        len([v for v in f.levels() if low <= v <= high]) if f.continuous else 1
        for f in made.factors
        for low, high in [window.ranges[f.name]]
    ]
    assert len(rows) == np.prod(sides) == np.prod(steps)
