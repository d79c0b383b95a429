import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.lab.roots import increasing_root
from tests.lab.conftest import STEADY


@STEADY
@given(
    st.lists(st.floats(-1e3, 1e3), min_size=1, max_size=5),
    st.floats(1e-3, 1e6),
)
def test_finds_every_root_where_newton_steps_alone_would_run_away(roots, steepness):
    roots = np.array(roots)

    def function(x):
        z = steepness * (x - roots)
        return np.arctan(z), steepness / (1 + z**2)

    found = increasing_root(function, roots - 700.0, roots + 2e4)
    assert found == pytest.approx(roots, rel=1e-14, abs=1e-14)


def test_finds_the_root_when_the_slope_is_of_no_use():
    found = increasing_root(lambda x: (np.sign(x - 0.3), np.full(x.shape, 1e-9)), [-1.0], [5.0])
    assert found == pytest.approx(0.3, rel=1e-14)


def test_bisects_where_newton_steps_stay_inside_and_creep():
    # A slope given fifty times too steep: 400 steps of a fiftieth would leave 0.03 % of the way.
    found = increasing_root(lambda x: (x - 0.7, np.full(x.shape, 50.0)), [0.0, -9.0], 4.0)
    assert found == pytest.approx([0.7, 0.7], rel=1e-12)


def test_each_element_has_bounds_and_root_of_its_own():
    cubes = np.array([[8.0], [27.0], [-64.0]])
    low, high = np.array([-10.0, -5.0]), 20.0
    found = increasing_root(
        lambda x: (x**3 + x - cubes, 3 * x**2 + 1), np.minimum(low, cubes), high
    )
    assert found.shape == (3, 2)
    assert found**3 + found == pytest.approx(np.repeat(cubes, 2, axis=1), rel=1e-13)


def test_goes_to_the_nearer_bound_where_there_is_no_root():
    def function(x):
        return x - np.array([9.0, -9.0]), np.ones(x.shape)

    assert increasing_root(function, [0.0, 0.0], 1.0) == pytest.approx([1.0, 0.0], abs=1e-14)
