"""The shape of a long tail."""

import numpy as np
import pytest

from muntin.surrogate.pareto import generalised_pareto_shape


@pytest.mark.parametrize("k", [0.3, 1.2])
def test_a_long_tail(k):
    n = 20_000
    u = np.random.default_rng(1).random(n)
    assert generalised_pareto_shape(np.sort((u**-k - 1) / k)) == pytest.approx(
        k, abs=4 * (1 + k) / n**0.5
    )
