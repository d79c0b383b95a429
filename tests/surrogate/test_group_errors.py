"""Errors of single groups: against the exact posterior of a linear model with known sds."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Coding, Continuous
from muntin.surrogate.evidence import Model
from muntin.surrogate.fit import family_of
from muntin.surrogate.group_errors import GroupErrors, inside_errors, joined, scale_errors
from muntin.surrogate.hyperparameters import integrate
from muntin.surrogate.priors import priors_of

PLATES = np.repeat([0, 1, 2], [5, 4, 3])


def readings(kind: str, seed: int = 4) -> Readings:
    rng = np.random.default_rng(seed)
    X = rng.uniform(-1, 1, (12, 2))
    error = np.array([0.3, -0.2, 0.05])[PLATES]
    if kind == "fraction":
        y = (1.0 + 0.3 * error) * 0.9 / (1.0 + np.exp(-1.5 * X[:, 0] - 1.0))
    else:
        y = 1.0 + X[:, 0] + error
    groups = (PLATES,)
    inside, scale = ((), groups) if kind == "fraction" else (groups, ())
    return Readings(
        X=X, y=y + 0.02 * rng.standard_normal(12), sd=np.zeros(12), inside=inside, scale=scale
    )


def columns():
    return Coding((Continuous(low=0.0, high=1.0),) * 2).columns


@pytest.mark.parametrize("name", ["gp", "quadratic"])
def test_inside_errors_are_the_exact_ones(name: str) -> None:
    given = readings("real")
    priors = priors_of("real", (0.0, 2.0))
    model = Model(family_of(name, columns(), priors), collapse(given), "identity")
    posterior = integrate(model, 1, 8)
    found = inside_errors(model, posterior, 0)
    nodes = np.flatnonzero(posterior.log_weights > posterior.log_weights.max() - 9.0)
    cells = model.cells
    for row, node in enumerate(nodes[:6]):
        theta = posterior.evidence.theta[node : node + 1]
        L = posterior.evidence.root[node]
        noise, sd = np.exp(theta[0, 0]), np.exp(theta[0, 1])
        order = cells.latent[cells.cell]
        K = (L @ L.T)[np.ix_(order, order)] + noise**2 * np.eye(12)
        c = sd**2 * (PLATES[:, None] == np.arange(3))
        gain = np.linalg.solve(K, c)
        mean = gain.T @ (given.y - priors.mean)
        variance = sd**2 - (c * gain).sum(0)
        np.testing.assert_allclose(found.mean[row], mean, atol=2e-4)
        np.testing.assert_allclose(found.variance[row], variance, rtol=2e-3)


def test_scale_errors_find_plates_that_read_high_and_low() -> None:
    given = readings("fraction")
    model = Model(
        family_of("quadratic", columns(), priors_of("fraction", (0.05, 0.95))),
        collapse(given),
        "logit",
    )
    found = scale_errors(model, integrate(model, 1, 64), 0)
    low, middle, high = (found.quantiles(level) for level in (0.025, 0.5, 0.975))
    assert middle[0] > middle[2] > middle[1]
    truth = 0.3 * np.array([0.3, -0.2, 0.05])
    assert ((low < truth) & (truth < high)).all()


def test_quantiles_of_a_mixture_are_those_of_draws() -> None:
    law = GroupErrors(np.array([0.3, 0.7]), np.array([[0.0], [2.0]]), np.array([[1.0], [0.25]]))
    rng = np.random.default_rng(1)
    first = rng.random(400_000) < 0.3
    z = rng.standard_normal(400_000)
    draws = np.where(first, z, 2.0 + 0.5 * z)
    for level in (0.025, 0.5, 0.975):
        # Four standard errors of the quantile of so many draws, density at least 0.03.
        assert law.quantiles(level)[0] == pytest.approx(np.quantile(draws, level), abs=0.035)


def test_joined_laws_share_their_weight() -> None:
    one = GroupErrors(np.array([1.0]), np.array([[0.0, 1.0]]), np.array([[1.0, 2.0]]))
    both = joined([one, replace(one, mean=one.mean + 40.0)], np.array([0.25, 0.75]))
    assert both.weights.tolist() == [0.25, 0.75]
    assert both.mean.shape == (2, 2)
    np.testing.assert_allclose(both.quantiles(0.125), [0.0, 1.0], atol=1e-6)
