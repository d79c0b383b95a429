"""Cells that are odd, a judged response that is awaited alone, and p_kept over three tolerances."""

import numpy as np
import pandas as pd
import pytest

import muntin
from muntin.window.grid import judged_grid
from tests.studies import LOAD, PH, RECOVERY, RESIN, SALT, read, spread, written
from tests.window.test_assessment import EARLIER, assessed, faults


@pytest.mark.parametrize("value", [None, pd.NA, np.True_, pd.Timestamp("2020-01-01")])
def test_odd_cells_are_faults(tmp_path, value):
    view = assessed(tmp_path, surrogate="quadratic")
    (line,) = faults(view, ph=pd.Series([value], dtype=object), salt=[100.0])
    assert line.startswith("conditions, row 1, column ph: ")
    assert line.endswith("is not a number in 4.5 to 7.5")


@pytest.mark.parametrize("value", [None, pd.NA, np.nan])
def test_empty_choices_are_faults(tmp_path, value):
    plate = read(spread([PH, RESIN], 12))
    view = assessed(tmp_path, [plate], "quadratic", factors=[PH, RESIN])
    (line,) = faults(view, ph=[5.0], resin=pd.Series([value], dtype=object))
    assert line.startswith("conditions, row 1, column resin: ")


def waiting(tmp_path):
    plates = [p.assign(closure=0.95, recovery="") for p in EARLIER]
    responses = [RECOVERY, {"name": "closure", "kind": "real"}]
    return muntin.assess(written(tmp_path / "study", plates, responses=responses), "quadratic")


def test_a_window_needs_a_judged_response_that_was_read(tmp_path):
    view = waiting(tmp_path)
    assert view.window().share < 1.0


def test_a_plan_does_not_break_where_only_a_tracked_response_was_read(tmp_path):
    plan = muntin.propose(waiting(tmp_path), wells=4)
    assert (plan.wells["role"] == "test").sum() == 4


@pytest.mark.slow
def test_p_kept_over_three_tolerances(tmp_path):
    factors = [
        {**PH, "kept_within": 0.2},
        {**SALT, "kept_within": "10 %"},
        {**LOAD, "kept_within": "20 %"},
    ]
    view = assessed(tmp_path, [read(spread(factors, 20))], "gp", factors=factors)
    grid, _ = judged_grid(view.study.definition)
    p = view.judged(grid, "well")
    edge = grid[(p > 0.02) & (p < 0.98)].iloc[::7]
    x, w = np.polynomial.legendre.leggauss(7)
    exact = np.zeros(len(edge))
    for i, j, k in np.ndindex(7, 7, 7):
        moved = edge.assign(
            ph=edge["ph"] + 0.2 * x[i],
            salt=edge["salt"] * (1.0 + 0.1 * x[j]),
            load=edge["load"] * (1.0 + 0.2 * x[k]),
        )
        exact += w[i] * w[j] * w[k] / 8.0 * view.judged(moved, "well")
    np.testing.assert_allclose(view.kept(edge), exact, atol=0.005)


def test_p_kept_at_many_conditions_agrees_with_that_at_few(tmp_path):
    factors = [{**PH, "step": 0.1, "kept_within": 0.2}, {**SALT, "step": 20, "kept_within": "10 %"}]
    view = assessed(tmp_path, [read(spread(factors, 14))], "stacked", factors=factors)
    grid, _ = judged_grid(view.study.definition)
    assert len(grid) > 500
    rows = slice(0, None, 2)
    some = view.kept(grid[rows])
    many = view.kept(grid)[rows]
    np.testing.assert_allclose(many, some, atol=0.03)
    near = np.abs(some - view.study.definition.required_probability) < 0.02
    assert near.any()
    np.testing.assert_allclose(many[near], some[near], atol=1e-5)
    # What is kept differs from the well itself by more than that.
    assert np.abs(some - view.judged(grid[rows], "well")).max() > 0.1
