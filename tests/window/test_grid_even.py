"""Coarsened levels stay even, and narrow limits leave something to judge."""

import numpy as np
import pytest

from muntin.window.grid import judged_grid
from tests.studies import PH, SALT
from tests.window.test_grid import definition


@pytest.mark.parametrize("most", [300, 1000, 4000])
def test_coarsened_levels_stay_evenly_spread(most):
    factors = [{**PH, "step": 0.01}, {**SALT, "step": 1}]
    grid, _ = judged_grid(definition(*factors), most)
    for factor in factors:
        steps = np.diff(sorted(set(grid[factor["name"]]))) / factor["step"]
        assert steps.max() - steps.min() < 1.0 + 1e-6


def test_a_narrow_limit_leaves_conditions_to_judge():
    # 101 x 101 levels are coarsened past the few that the limit allows.
    a, b = ({"name": name, "low": 0, "high": 100, "step": 1} for name in "ab")
    grid, _ = judged_grid(definition(a, b, limits=[{"allow": "abs(a - 37) + abs(b - 41) <= 0.9"}]))
    assert len(grid) == 1
