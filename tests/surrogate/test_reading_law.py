"""Readings as one Gaussian law, against prior covariances term by term and the engine's mode."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize

from muntin.surrogate.cells import Readings
from muntin.surrogate.fit import fit_surrogate
from muntin.surrogate.reading_law import reading_law
from tests.surrogate.problems import COLUMNS, priors, reading_covariance, readings

FAMILIES = pytest.mark.parametrize("name", ["gp", "quadratic"])


def fitted(name, data, kind):
    return fit_surrogate(name, data, kind, COLUMNS, priors(kind), 1)


@FAMILIES
def test_identity_link_gives_the_prior_covariance_of_the_readings(name):
    data = readings(1, "real", scale=())
    fit = fitted(name, data, "real")
    theta = (fit.weights @ fit.theta)[None]
    rows = np.arange(len(data))
    law = reading_law(fit, data, rows)
    K = reading_covariance(fit.model, theta, data)
    np.testing.assert_allclose(law.covariance, K, rtol=1e-7, atol=1e-9)
    np.testing.assert_allclose(law.misfit, data.y - fit.model.family.priors.mean, atol=1e-9)
    # Leave-one-out residual times noise over predictive variance (Rasmussen & Williams, eq. 5.12).
    own = law.own**2
    for i in (0, 7, len(data) - 1):
        rest = np.delete(rows, i)
        weights = np.linalg.solve(K[np.ix_(rest, rest)], K[rest, i])
        left = law.misfit[i] - weights @ law.misfit[rest]
        variance = K[i, i] - weights @ K[rest, i]
        assert law.residual[i] == pytest.approx(own[i] / variance * left, rel=1e-6)


@FAMILIES
def test_a_fraction_is_linearised_at_its_mode(name):
    data = readings(2, "fraction")
    fit = fitted(name, data, "fraction")
    model, theta = fit.model, (fit.weights @ fit.theta)[None]
    law = reading_law(fit, data, np.arange(len(data)))
    # The mode of the whitened variables, by a general minimiser.
    rows, lik = model.rows(theta), model.likelihood(theta)
    cell, e = model.cells.cell, lik.scale[0, 0]
    root, shared = rows.root[0][rows.latent[cell]], rows.scale[0][cell]
    ceiling, offset = lik.ceiling[0, 0], lik.offset

    def fitted_mean(w):
        u, s = root @ w[: root.shape[1]], shared @ w[root.shape[1] :]
        return (1.0 + e * s) * ceiling / (1.0 + np.exp(-u - offset))

    def loss(w):
        return 0.5 * w @ w + 0.5 * (((data.y - fitted_mean(w)) / law.own) ** 2).sum()

    start = np.zeros(root.shape[1] + shared.shape[1])
    found = minimize(loss, start, method="L-BFGS-B", options={"maxiter": 5000, "maxfun": 500_000})
    np.testing.assert_allclose(law.residual, data.y - fitted_mean(found.x), atol=2e-3)
    assert np.abs(law.residual).max() > 0.03


def test_some_rows_are_the_rows_of_all():
    data = readings(3, "real", scale=())
    fit = fitted("quadratic", data, "real")
    rows = np.array([4, 0, 9])
    some, every = reading_law(fit, data, rows), reading_law(fit, data, np.arange(len(data)))
    np.testing.assert_allclose(some.covariance, every.covariance[np.ix_(rows, rows)])
    np.testing.assert_allclose(some.misfit, every.misfit[rows])
    np.testing.assert_allclose(some.own, every.own[rows])


def test_setting_errors_shift_readings_along_the_slope():
    rng = np.random.default_rng(4)
    X = np.column_stack([np.linspace(-1.0, 1.0, 15), np.zeros((15, 2))])
    setting = np.zeros_like(X)
    setting[:, 0] = 0.05
    y = 1.0 + 1.5 * X[:, 0] + 0.05 * rng.normal(size=15)
    data = Readings(X=X, y=y, sd=np.zeros(15), setting=setting)
    law = reading_law(fitted("quadratic", data, "real"), data, np.arange(15))
    np.testing.assert_allclose(law.moved[:, 0], 1.5 * 0.05, rtol=0.15)
    assert (law.moved[:, 1:] == 0.0).all()
    np.testing.assert_allclose(law.own**2 - law.noise**2, law.moved[:, 0] ** 2, rtol=0.1)
    still = replace(data, setting=np.zeros_like(X))
    law = reading_law(fitted("quadratic", still, "real"), still, np.arange(15))
    assert (law.moved == 0.0).all()
    np.testing.assert_allclose(law.own, law.noise)
