"""Leave-one-out predictions from draws, against explicit refits without each reading.

The problem has an identity link and its draws are exact ones, by dense normal conditioning at known
hyperparameters, so that the refits are exact too.
"""

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import norm, t

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.draws import Draws, Law
from muntin.surrogate.evidence import evaluate
from muntin.surrogate.psis import psis_leave_one_out
from tests.surrogate.problems import model_of, reading_covariance

DRAWS = 8000


def problem(censored=None):
    """45 readings of one factor, a noise of 0.3, other hyperparameters at their medians, and exact
    draws of w.
    """
    rng = np.random.default_rng(11)
    x = rng.uniform(-1.0, 1.0, 45)
    y = 1.0 + 1.2 * x - 0.5 * x**2 + rng.normal(0.0, 0.3, 45)
    data = Readings(X=x[:, None], y=y, sd=np.zeros(45))
    if censored is not None:
        data = replace(data, censored=censored)
    model = model_of("quadratic", data, "real", Columns.plain(1))
    eta = np.zeros(len(model.layout))
    eta[0] = np.log(0.3 / 0.1)
    theta = model.layout.theta(eta[None])
    assert model.layout.noise(theta) == pytest.approx(0.3)
    approximation = evaluate(model, theta).approximation
    root = np.linalg.cholesky(approximation.V[0])
    w = approximation.mean[0] + rng.normal(size=(DRAWS, root.shape[0])) @ root.T
    draws = Draws(
        model=model,
        eta=np.broadcast_to(eta, (4, DRAWS // 4, len(eta))),
        w=w.reshape(4, DRAWS // 4, -1),
        z=np.zeros((4, DRAWS // 4, 0)),
        nu=None,
        stats={},
        sampler="exact",
    )
    return data, model, theta, draws


def test_predictions_agree_with_refits():
    data, model, theta, draws = problem()
    loo, k = psis_leave_one_out(draws, 1.0)
    K = reading_covariance(model, theta, data)
    residual = data.y - model.family.priors.mean
    assert (k < 0.7).all()
    for i in range(len(data)):
        rest = np.arange(len(data)) != i
        pull = np.linalg.solve(K[np.ix_(rest, rest)], K[rest, i])
        mean = model.family.priors.mean + pull @ residual[rest]
        sd = np.sqrt(K[i, i] - pull @ K[rest, i])
        # Weighted averages over 8,000 draws: the latent mean has an error near 0.002 of an sd.
        assert loo.log_density[i] == pytest.approx(norm.logpdf(data.y[i], mean, sd), abs=0.02)
        assert loo.mean[i] == pytest.approx(mean, abs=0.02 * sd)
        assert loo.sd[i] == pytest.approx(sd, rel=0.01)
        assert loo.pit[i] == pytest.approx(norm.cdf(data.y[i], mean, sd), abs=0.01)


def test_a_censored_reading_has_a_probability_and_no_transform():
    censored = np.zeros(45, dtype=np.intp)
    censored[[4, 30]] = [-1, 1]
    data, _, _, draws = problem(censored)
    loo, _ = psis_leave_one_out(draws, 1.0)
    assert np.flatnonzero(np.isnan(loo.pit)).tolist() == [4, 30]
    below = norm.cdf(data.y[4], loo.mean[4], loo.sd[4])
    above = norm.sf(data.y[30], loo.mean[30], loo.sd[30])
    assert np.exp(loo.log_density[[4, 30]]) == pytest.approx([below, above], abs=0.02)


def test_students_law_is_scipys():
    rng = np.random.default_rng(12)
    centre, sd, nu = (
        rng.normal(size=(3, 5)),
        rng.gamma(2.0, size=(3, 5)),
        np.array([[2.5], [8], [30]]),
    )
    y, censored = rng.normal(size=5), np.array([0, -1, 1, 0, 0])
    law = Law(centre, sd, nu)
    exact = t(nu, centre, sd)
    expected = np.where(censored == 0, exact.logpdf(y), exact.logcdf(y))
    expected[:, 2] = exact.logsf(y)[:, 2]
    assert law.log_density(y, censored) == pytest.approx(expected)
    assert law.below(y) == pytest.approx(exact.cdf(y))
    share = exact.cdf(centre + law.width) - exact.cdf(centre - law.width)
    assert share == pytest.approx(np.full((3, 5), norm.cdf(1.0) - norm.cdf(-1.0)))
