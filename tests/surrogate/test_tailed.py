"""The law that draws about a node come from, against its own density and brute force."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import multivariate_normal, t
from scipy.stats.qmc import Sobol

from muntin.surrogate import tailed
from muntin.surrogate.skewness import skew_axis
from muntin.surrogate.tailed import Tailed
from tests.benchmarks.trials import set_with_errors
from tests.surrogate.test_cloud import modelled

AXIS = np.array([[0.6, 0.0, -0.8], [0.0, 1.0, 0.0]])


def drawn(n, node):
    points = Sobol(5, rng=np.random.default_rng(1)).random(n)
    return Tailed(AXIS).draw(points, np.full(n, node))


@pytest.mark.parametrize("node", [0, 1])
def test_draws_reweighted_by_the_density_are_standard_normal(node):
    """Mass, means and covariance of N(0, I), by importance weights."""
    n = 2**16
    z = drawn(n, node)
    ratio = multivariate_normal(np.zeros(3)).logpdf(z) - Tailed(AXIS).log_density(
        z, np.full(n, node)
    )
    weights = np.exp(ratio) / n
    assert weights.sum() == pytest.approx(1.0, abs=0.01)
    assert weights @ z == pytest.approx(np.zeros(3), abs=0.02)
    assert (z.T * weights) @ z == pytest.approx(np.eye(3), abs=0.03)


def test_the_long_side_holds_what_the_mixture_says():
    """Beyond 6 sds along the axis and as far to the other side, from the t laws themselves."""
    n, share = 2**16, tailed._SHARE
    along = drawn(n, 0) @ AXIS[0]
    first = (1.0 - share) * t(tailed._DEGREES).sf(6.0)
    long = tailed._LONG
    second = share * 2.0 * long / (1.0 + long) * t(tailed._LONG_DEGREES).sf(6.0 / long)
    assert (along > 6.0).mean() == pytest.approx(first + second, rel=0.05)
    short = share * 2.0 / (1.0 + long) * t(tailed._LONG_DEGREES).sf(6.0)
    assert (along < -6.0).mean() == pytest.approx(first + short, rel=0.3)


def test_the_density_along_the_axis_integrates_to_the_mass_across():
    """On a line through the origin along the axis: against the two parts written out."""
    law, node = Tailed(AXIS), np.zeros(1, dtype=int)
    line = quad(lambda a: np.exp(law.log_density(a * AXIS[:1], node))[0], -60.0, 200.0, limit=400)
    # The density of a standard t of twelve degrees at the origin of two and of three dimensions.
    across = quad(lambda r: 2.0 * np.pi * r * (1.0 + r * r / 12.0) ** -7.0, 0.0, 200.0, limit=400)[
        0
    ]
    plain = (
        quad(lambda a: (1.0 + a * a / 12.0) ** -7.5, -60.0, 60.0, limit=400)[0]
        / quad(lambda r: 4.0 * np.pi * r * r * (1.0 + r * r / 12.0) ** -7.5, 0.0, 500.0, limit=400)[
            0
        ]
    )
    expected = (1.0 - tailed._SHARE) * plain + tailed._SHARE / across
    assert line[0] == pytest.approx(expected, rel=1e-3)


def test_the_axis_is_where_the_third_cumulant_is_largest():
    """Against some thousands of directions tried, near it and far from it."""
    model, posterior = modelled(set_with_errors(), "gp", nodes=4)
    evidence = posterior.evidence
    approx, rows = evidence.approximation, model.rows(evidence.theta, evidence.root)
    root = np.linalg.cholesky(approx.V)
    axis = skew_axis(rows, approx, root)
    assert np.linalg.norm(axis, axis=1) == pytest.approx(np.ones(len(axis)))
    rng = np.random.default_rng(2)
    for k in np.argsort(-posterior.log_weights)[:2]:
        own = evidence.root[k][model.cells.latent] @ root[k][: evidence.root.shape[2]]
        third, variance = approx.tilted.third[k, :, 0], (own**2).sum(1)

        def cumulant(v, own=own, third=third, variance=variance):
            return (third * (v @ own.T / variance) ** 3).sum(-1)

        tried = rng.normal(size=(2000, 50)) @ np.eye(50)[:, : root.shape[2]]
        near = axis[k] + rng.normal(size=(2000, root.shape[2])) * rng.choice([0.05, 0.3], (2000, 1))
        toward = [axis[k] + c * own for c in (-0.3, -0.1, -0.02, 0.02, 0.1, 0.3)]
        every = np.concatenate([tried, near, own, -own, *toward])
        every /= np.linalg.norm(every, axis=1, keepdims=True)
        assert cumulant(axis[k]) > 0.2
        assert cumulant(every).max() < 1.001 * cumulant(axis[k])
