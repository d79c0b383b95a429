import numpy as np
import pytest
from scipy.optimize import minimize

from tests.benchmarks.published import (
    BRANIN_LEAST,
    HARTMANN_LEAST,
    branin,
    branin_signal,
    disk,
    hartmann,
    hartmann_signal,
)

MINIMA = np.array([[-np.pi, 12.275], [np.pi, 2.275], [3.0 * np.pi, 2.475]])


def test_branin_has_its_three_published_minima():
    np.testing.assert_allclose(branin(MINIMA), BRANIN_LEAST, rtol=1e-12)
    np.testing.assert_allclose(branin_signal(MINIMA), 100.0, rtol=1e-12)
    every = np.stack(np.meshgrid(np.linspace(-5, 10, 61), np.linspace(0, 15, 61)), -1)
    signal = branin_signal(every.reshape(-1, 2))
    assert signal.min() == pytest.approx(0.0, abs=1e-9)
    assert 99.9 < signal.max() <= 100.0


def test_only_one_minimum_lies_in_the_disk():
    assert (disk(MINIMA) <= 50.0).tolist() == [False, True, False]


def test_hartmann_has_its_published_minimum_and_no_lower_one():
    rng = np.random.default_rng(1)
    found = [
        minimize(lambda x: hartmann(x[None])[0], start, bounds=[(0.0, 1.0)] * 3)
        for start in rng.random((40, 3))
    ]
    least = min(found, key=lambda one: one.fun)
    assert least.fun == pytest.approx(HARTMANN_LEAST, abs=1e-5)
    np.testing.assert_allclose(least.x, [0.114614, 0.555649, 0.852547], atol=1e-4)
    assert hartmann_signal(least.x[None])[0] == pytest.approx(100.0, abs=1e-3)
