"""A narrow band of allowed conditions is judged from end to end."""

from muntin.window.grid import judged_grid
from tests.window.test_grid import definition


def test_a_narrow_band_is_judged_from_end_to_end():
    a, b = ({"name": name, "low": 0, "high": 999, "step": 1} for name in "ab")
    grid, _ = judged_grid(definition(a, b, limits=[{"allow": "abs(a - b) <= 5"}]))
    assert len(grid) <= 4000
    assert (grid["a"].min(), grid["a"].max()) == (0, 999)
