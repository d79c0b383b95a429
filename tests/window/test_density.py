"""The density of a future reading, against the slope of its distribution and a fine quadrature."""

import numpy as np
import pytest

from muntin.window.density import reading_density
from muntin.window.probability import Target, well_meets
from tests.window.test_probability import CEILING, moments, surface


def quadrature(post, known, limit):
    """Density (nodes, rows) of a fraction's reading by 20,001 points of the latent value."""
    mean, variance = known
    out = np.zeros_like(mean)
    for s, i in np.ndindex(*mean.shape):
        sd = np.sqrt(variance[s, i] + (post.errors.inside[s] ** 2).sum())
        z = np.linspace(-9.0, 9.0, 20_001)
        g = CEILING[s] / (1.0 + np.exp(-mean[s, i] - sd * z))
        v = post.errors.noise[s] ** 2 + (post.errors.scale[s] ** 2).sum() * g**2
        each = np.exp(-0.5 * z**2 - 0.5 * (limit - g) ** 2 / v) / (2.0 * np.pi * np.sqrt(v))
        out[s, i] = each.sum() * (z[1] - z[0])
    return out


@pytest.mark.parametrize("limit", [0.3, 0.7, 0.85, 0.93, 1.02])
@pytest.mark.parametrize("noise", [0.01, 0.04])
def test_a_fraction_agrees_with_a_fine_quadrature(limit, noise):
    post, known = surface("logit", noise), moments("logit")
    exact = quadrature(post, known, limit)
    ours = reading_density(post, known, limit)
    # Where the target lies on the plateau the latent value's law is skewed; most are far closer.
    error = np.abs(ours - exact) / exact.max()
    assert error.max() < 0.02
    assert np.median(error) < 5e-4


@pytest.mark.parametrize("link", ["logit", "log", "identity"])
def test_it_is_the_slope_of_the_distribution(link):
    post, known = surface(link), moments(link)
    wander = np.full((3, 4), 0.05**2)
    limit, step = 0.8, 1e-3
    under, over = (
        well_meets(post, known, Target(high=end), wander) for end in (limit - step, limit + step)
    )
    # The density of a positive response is that of its logarithm.
    slope = (over - under) / (2.0 * step) * (limit if link == "log" else 1.0)
    ours = post.weights @ reading_density(post, known, limit, wander)
    np.testing.assert_allclose(ours, slope, rtol=0.01, atol=1e-4)


def test_it_integrates_to_one():
    post, known = surface("logit", 0.02), moments("logit")
    at = np.linspace(-0.3, 1.4, 1701)
    whole = sum(reading_density(post, known, limit) for limit in at) * (at[1] - at[0])
    np.testing.assert_allclose(whole, 1.0, atol=0.01)
