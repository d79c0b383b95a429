import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.surrogate.coding import Choice, Coding, Columns, Continuous

SIZES = st.floats(0.01, 1e4)


@given(low=st.floats(-1e3, 1e3), width=SIZES, share=st.floats(-0.5, 1.5))
def test_a_continuous_factor_is_coded_in_proportion(low, width, share):
    factor = Continuous(low=low, high=low + width)
    coded = factor.code([low, low + width, low + share * width])
    assert coded.shape == (3, 1)
    assert coded[:, 0] == pytest.approx([-1.0, 1.0, 2.0 * share - 1.0], abs=1e-8)


@given(low=SIZES, ratio=st.floats(1.5, 1e3), share=st.floats(-0.5, 1.5))
def test_equal_ratios_are_equal_steps_on_a_log_scale(low, ratio, share):
    factor = Continuous(low=low, high=low * ratio, log=True)
    coded = factor.code([low, low * ratio, low * ratio**share])
    assert coded[:, 0] == pytest.approx([-1.0, 1.0, 2.0 * share - 1.0], abs=1e-9)


@pytest.mark.parametrize("levels", [2, 3, 4, 7])
def test_choices_are_corners_two_apart_about_the_origin(levels):
    corners = Choice(levels=levels).code(np.arange(levels))
    assert corners.shape == (levels, Choice(levels=levels).width) == (levels, levels - 1)
    apart = np.linalg.norm(corners[:, None] - corners[None], axis=-1)
    assert apart == pytest.approx(2.0 * (1.0 - np.eye(levels)), abs=1e-12)
    assert corners.mean(axis=0) == pytest.approx(np.zeros(levels - 1), abs=1e-12)


def test_level_numbers_are_looked_up_one_by_one():
    factor = Choice(levels=3)
    assert np.array_equal(factor.code([2, 0, 2, 1]), factor.corners()[[2, 0, 2, 1]])


def test_columns_know_their_factor_and_whether_a_square_makes_sense():
    coding = Coding((Choice(levels=4), Continuous(low=0, high=1), Choice(levels=2)))
    assert coding.columns == Columns((0, 0, 0, 1, 2), (False, False, False, True, False))
    assert coding.columns.factors == 3
    assert Columns.plain(3) == Columns((0, 1, 2), (True, True, True))


def test_factors_are_coded_side_by_side_in_order():
    coding = Coding((Continuous(low=4, high=6), Choice(levels=3), Continuous(low=10, high=1000)))
    coded = coding.code([[4.5, 6.0], [1, 2], [10.0, 505.0]])
    corners = Choice(levels=3).corners()
    assert coded == pytest.approx(np.array([[-0.5, *corners[1], -1.0], [1.0, *corners[2], 0.0]]))


def test_a_missing_column_is_refused():
    coding = Coding((Continuous(low=4, high=6), Choice(levels=3)))
    with pytest.raises(ValueError, match="shorter"):
        coding.code([[4.5, 6.0]])
