"""Ranges under limits that cut the first levels, and set points that tie."""

import numpy as np
import pytest

from tests.window.test_window import definition, judge, within


@pytest.mark.parametrize("seed", range(20))
def test_ranges_hold_under_a_limit_that_cuts_the_first_levels(seed):
    made = definition(limits=[{"allow": "salt >= 300 - 100 * (ph - 4.5)"}])
    rng = np.random.default_rng(seed)
    window = judge(made, lambda grid: np.where(rng.random(len(grid)) < 0.9, 0.95, 0.5))
    assert all(low <= high for low, high in window.ranges.values())
    rows = within(window, made)
    assert rows["inside"].all()
    assert window.setpoint.name in rows.index


def test_setpoint_lies_inside_where_any_condition_does():
    made = definition()

    def p(grid):
        corner = (grid["ph"] == 4.5) & (grid["salt"] == 50)
        return np.where(corner, 0.9004, 0.8997)

    window = judge(made, p)
    assert window.share > 0.0
    assert window.setpoint["probability"] >= 0.9
    assert window.ranges is not None
