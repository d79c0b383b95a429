"""The chance of a wrong call when nothing new is known."""

import numpy as np
from scipy.special import ndtr

from muntin.design.excursion import expected_wrong


def test_without_new_knowledge_the_chance_of_a_wrong_call_stays():
    c = np.array([-4.0, -1.3, 0.0, 0.2, 2.5])
    p = ndtr(c)
    np.testing.assert_allclose(expected_wrong(c, np.zeros(5)), np.minimum(p, 1.0 - p), rtol=1e-12)
