"""Conditions at which the window is judged."""

import numpy as np
import pytest
from scipy.stats import kstest

from muntin.record.definition import Definition
from muntin.window.grid import judged_grid, scattered
from tests.studies import LOAD, PH, RESIN, SALT, TIME, tables


def definition(*factors, **given):
    return Definition.model_validate(tables(factors=list(factors), **given))


def on_steps(values, factor):
    away = (values.astype(float) - factor["low"]) / factor["step"]
    return (away - away.round()).abs().max() < 1e-9


def test_small_ranges_give_every_bench_step():
    grid, regular = judged_grid(definition(PH, SALT, RESIN))
    assert regular
    assert len(grid) == 7 * 9 * 3
    assert not grid.duplicated().any()
    assert list(grid.columns) == ["ph", "salt", "resin"]
    assert list(grid.index) == list(range(189))


FINE = {**SALT, "step": 1}
WIDE = [
    ((PH, FINE), 2000),
    (({**PH, "step": 0.01}, FINE), 4000),
    (({**PH, "step": 0.1}, {**SALT, "step": 10}, {**TIME, "step": 1}), 4000),
    ((PH, FINE, RESIN), 1000),
]


@pytest.mark.parametrize(("factors", "most"), WIDE)
def test_coarsening_keeps_ends_steps_and_choices(factors, most):
    grid, regular = judged_grid(definition(*factors), most)
    assert regular
    assert 0.75 * most < len(grid) <= most
    assert len(grid) == np.prod([grid[factor["name"]].nunique() for factor in factors])
    for factor in factors:
        values = grid[factor["name"]]
        if "choices" in factor:
            assert set(values) == set(factor["choices"])
        else:
            assert (values.min(), values.max()) == (factor["low"], factor["high"])
            assert on_steps(values, factor)


def test_a_high_end_off_the_steps_is_not_reached():
    grid, _ = judged_grid(definition({**PH, "step": 0.7}, SALT))
    assert sorted(set(grid["ph"])) == [4.5, 5.2, 5.9, 6.6, 7.3]


def test_many_choices_are_never_left_out():
    many = {"name": "resin", "choices": [f"resin {i}" for i in range(60)]}
    grid, _ = judged_grid(definition(many, {**PH, "step": 0.1}), 100)
    assert grid["resin"].nunique() == 60
    assert grid["ph"].nunique() == 3


def test_limits_hold():
    limits = [{"allow": "salt <= 900 - 150 * (ph - 3)"}, {"allow": "salt != 100"}]
    whole, _ = judged_grid(definition(PH, SALT))
    grid, regular = judged_grid(definition(PH, SALT, limits=limits))
    kept = (whole["salt"] <= 900 - 150 * (whole["ph"] - 3)) & (whole["salt"] != 100)
    assert regular
    assert 10 < len(grid) < len(whole)
    assert grid.equals(whole[kept].reset_index(drop=True))


def test_plan_ranges_count_only_where_asked():
    made = definition({**PH, "plan_low": 5.5}, {**RESIN, "plan_choices": ["Beta"]})
    assert len(judged_grid(made)[0]) == 21
    planned, _ = judged_grid(made, planned=True)
    assert set(planned["ph"]) == {5.5, 6.0, 6.5, 7.0, 7.5}
    assert set(planned["resin"]) == {"Beta"}


# Beyond three factors.


def test_beyond_three_factors_conditions_are_scattered():
    factors = [PH, SALT, {**TIME, "step": 1}, RESIN]
    grid, regular = judged_grid(definition(*factors))
    assert not regular
    assert 1000 < len(grid) <= 4000
    assert not grid.duplicated().any()
    for factor in factors[:3]:
        assert on_steps(grid[factor["name"]], factor)
        assert (grid[factor["name"]].min(), grid[factor["name"]].max()) == (
            factor["low"],
            factor["high"],
        )
    share = grid["resin"].value_counts(normalize=True)
    assert share.between(0.30, 0.37).all()


def test_scattered_conditions_are_the_same_each_time_and_spread_evenly():
    made = definition({**PH, "step": 0.01}, {**SALT, "step": 1}, TIME, RESIN)
    first, again = (scattered(made, 512, 0, False) for _ in range(2))
    assert first.equals(again)
    assert not first.equals(scattered(made, 512, 1, False))
    assert len(first) == 512
    for name, low, high in (("ph", 4.5, 7.5), ("salt", 50, 450)):
        unit = (first[name].astype(float) - low) / (high - low)
        # Draws by chance would come this close to even in one case of a hundred thousand.
        assert kstest(unit, "uniform").statistic < 0.015


def test_scattered_conditions_of_a_log_scale_are_even_in_ratios():
    fine = {**LOAD, "low": 1, "high": 100, "step": 0.1}
    made = definition(fine, PH, SALT, TIME)
    values = scattered(made, 1024, 0, False)["load"].astype(float)
    assert ((values - 1.0) / 0.1).sub(((values - 1.0) / 0.1).round()).abs().max() < 1e-6
    assert kstest(np.log(values) / np.log(100.0), "uniform").statistic < 0.03


def test_scattered_conditions_keep_to_limits_and_plan_ranges():
    factors = [{**PH, "plan_high": 6.0}, SALT, TIME, {**RESIN, "plan_choices": ["Alpha"]}]
    made = definition(*factors, limits=[{"allow": "salt >= minutes * 5"}])
    grid, _ = judged_grid(made, planned=True)
    assert (grid["salt"] >= 5 * grid["minutes"]).all()
    assert grid["ph"].max() == 6.0
    assert set(grid["resin"]) == {"Alpha"}
    assert len(grid) > 100
