import numpy as np
import pytest

from muntin.surrogate import tilted


@pytest.fixture
def fine_quadrature(monkeypatch):
    """300 points a cell instead of 32, to tell a formula from the quadrature that it stands on."""
    points, weights = np.polynomial.hermite_e.hermegauss(300)
    monkeypatch.setattr(tilted, "_ABSCISSAE", points)
    monkeypatch.setattr(tilted, "_LOG_WEIGHTS", np.log(weights) + 0.5 * points**2)
