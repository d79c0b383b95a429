"""p_well of a fraction at one node, against a dense integral over the latent value."""

from dataclasses import dataclass

import numpy as np
import pytest
from scipy.special import expit, ndtr

from muntin.surrogate.nodes import Errors, Surface
from muntin.window.probability import Target, well_meets


@dataclass(frozen=True)
class Known:
    errors: Errors


@pytest.mark.parametrize("sd", [0.3, 0.79, 1.5, 4.0])
@pytest.mark.parametrize(("noise", "scale"), [(0.03, 0.02), (0.01, 0.005), (0.003, 0.001)])
def test_p_well_agrees_with_a_dense_integral(noise, scale, sd):
    errors = Errors(np.array([noise]), np.zeros((1, 0)), np.array([[scale]]), np.ones(1))
    surface = Surface((Known(errors),), np.ones(1), "logit")
    mean = np.linspace(-1.0, 5.0, 41)[None]
    z = np.linspace(-8.5, 8.5, 40_001)
    w = np.exp(-0.5 * z * z) / np.exp(-0.5 * z * z).sum()
    ours = well_meets(surface, (mean, np.full_like(mean, sd**2)), Target(low=0.8))
    for m, p in zip(mean[0], ours, strict=True):
        g = expit(m + sd * z)
        assert p == pytest.approx(w @ ndtr((g - 0.8) / np.hypot(noise, scale * g)), abs=0.005)
