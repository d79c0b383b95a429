"""The chance of a wrong call when nothing new is known."""

import numpy as np
from scipy.special import ndtr

from muntin.design.excursion import expected_square, expected_wrong


def test_without_new_knowledge_the_chance_of_a_wrong_call_stays():
    c = np.array([-4.0, -1.3, 0.0, 0.2, 2.5])
    p = ndtr(c)
    np.testing.assert_allclose(expected_wrong(c, np.zeros(5)), np.minimum(p, 1.0 - p), rtol=1e-12)


def test_limits_that_some_nodes_cannot_reach_leave_numbers():
    # Two nodes, the second with a ceiling below the upper limit: its score is infinite.
    low, high = np.array([[-0.4], [0.3]]), np.array([[1.1], [np.inf]])
    square = expected_square(low, high, np.array([[0.5], [0.5]]))
    alone = expected_square(low[1:], high[1:], np.array([[0.5]]))
    np.testing.assert_allclose(square[1:], alone, rtol=1e-9)
