"""Leave-one-out predictions against explicit refits without each reading."""

import numpy as np
import pandas as pd
import pytest
from scipy.stats import norm

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.fit import fit_surrogate
from muntin.surrogate.loo import leave_one_out
from muntin.window.probability import process_mean
from tests.studies import PH, SALT, read, spread
from tests.surrogate.problems import model_of, priors, reading_covariance, readings, settled

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])


def left_out(model, theta, log_weights):
    evidence = settled(model, theta)
    prior = evidence.prior_variance(model.cells)
    return evidence, leave_one_out(
        model.cells, model.likelihood(theta), evidence.approximation, log_weights, prior
    )


@NAMES
def test_the_identity_link_agrees_with_refits(name):
    """Predictions of y_i from the n - 1 others, by dense normal conditioning, at two nodes.

    The nodes' weights given y_-i are their weights given y over p(y_i | y_-i).
    """
    data = readings(41, "real", n=22, inside=(3,), scale=())
    model = model_of(name, data, "real")
    assert len(model.cells) < len(data)
    theta = model.layout.theta(np.random.default_rng(7).normal(0.0, 0.5, (2, len(model.layout))))
    weights = np.array([0.3, 0.7])
    _, loo = left_out(model, theta, np.log(weights))
    K = [reading_covariance(model, theta[s : s + 1], data) for s in range(2)]
    residual = data.y - model.family.priors.mean
    for i in range(len(data)):
        rest = np.arange(len(data)) != i
        means, sds = [], []
        for k in K:
            pull = np.linalg.solve(k[np.ix_(rest, rest)], k[rest, i])
            means.append(model.family.priors.mean + pull @ residual[rest])
            sds.append(np.sqrt(k[i, i] - pull @ k[rest, i]))
        means, sds = np.array(means), np.array(sds)
        p = norm.pdf(data.y[i], means, sds)
        w = weights / p / (weights / p).sum()
        mean = w @ means
        assert loo.log_density[i] == pytest.approx(np.log(w @ p), abs=1e-6)
        assert loo.mean[i] == pytest.approx(mean, abs=1e-6)
        assert loo.sd[i] == pytest.approx(np.sqrt(w @ (sds**2 + (means - mean) ** 2)), abs=1e-6)


@NAMES
@pytest.mark.parametrize("groups", [0, 3])
def test_a_fraction_agrees_with_refits_where_wells_have_neighbours(name, groups):
    """log p(y_i | y_-i) is the log evidence with y_i less that without it.

    A cavity is the posterior without a cell only while the sites of the others stay where they
    were; with 45 wells on one factor that costs a thousandth on average.
    """
    rng = np.random.default_rng(42)
    n = 45
    x = rng.uniform(-1.0, 1.0, n)
    scale = (rng.integers(0, groups, n),) if groups else ()
    y = 1.0 / (1.0 + np.exp(-0.5 - 2.0 * x)) + rng.normal(0.0, 0.04, n)
    data = Readings(X=x[:, None], y=y, sd=np.zeros(n), scale=scale)
    model = model_of(name, data, columns=Columns.plain(1))
    theta = model.layout.theta(np.full((1, len(model.layout)), 0.2))
    evidence, loo = left_out(model, theta, np.zeros(1))
    refits = []
    for i in range(n):
        fewer = data.take(np.delete(np.arange(n), i))
        others = model_of(name, fewer, columns=Columns.plain(1))
        refits.append(evidence.log[0] - settled(others, theta).log[0])
    difference = loo.log_density - np.array(refits)
    assert np.abs(difference).mean() < 0.003
    assert np.abs(difference).max() < 0.03


@pytest.mark.parametrize("seed", [1, 3])
def test_a_well_beside_a_wild_one_is_predicted_from_the_others(seed):
    """A well on the plateau; another one there reads 0.3. Against a refit without the well, whose
    plate is then a new one.
    """
    plates = [read(spread((PH, SALT), 12, k), k, e) for k, e in ((1, 0.02), (2, -0.03))]
    wells = pd.concat(plates, ignore_index=True)
    wild, i = int(wells["recovery"][:12].argmax()), 1
    X = np.column_stack([(wells["ph"] - 6.0) / 1.5, (wells["salt"] - 250.0) / 200.0])
    y = np.where(np.arange(24) == wild, 0.3, wells["recovery"])
    data = Readings(X=X, y=y, sd=np.zeros(24), scale=(np.arange(24) // 12,))
    rest = data.take(np.delete(np.arange(24), i))
    fit, refit = (
        fit_surrogate("gp", d, "fraction", Columns.plain(2), priors(), seed) for d in (data, rest)
    )
    expected = process_mean(refit.surface, refit.surface.moments(X[[i]]))[0]
    assert y[i] > 0.95
    assert fit.loo.mean[i] == pytest.approx(expected, abs=0.1)


def test_predictions_of_a_fraction_agree_with_draws():
    """Mean, sd and transform of the predictive law of a repeated well, by drawing from the cavity.

    200,000 draws: errors of 1 / sqrt(200,000) = 0.0022 of an sd; 4 of them are allowed.
    """
    data = readings(43, n=20, inside=(), scale=(2,), with_sd=False)
    model = model_of("gp", data)
    theta = model.layout.theta(np.zeros((1, len(model.layout))))
    evidence, loo = left_out(model, theta, np.zeros(1))
    cells, lik, cavity = model.cells, model.likelihood(theta), evidence.approximation.cavity
    i = int(np.flatnonzero(cells.count[cells.cell] == 2)[0])
    c, noise = cells.cell[i], np.sqrt(lik.noise[0, 0])
    other = next(j for j in np.flatnonzero(cells.cell == c) if j != i)
    rng = np.random.default_rng(8)
    mu = [cavity.u[0, c], cavity.s[0, c]]
    K = [[cavity.uu[0, c], cavity.us[0, c]], [cavity.us[0, c], cavity.ss[0, c]]]
    u, s = rng.multivariate_normal(mu, K, 200_000).T
    mean = (1.0 + lik.scale[0, 0] * s) * lik.process_mean(u[None])[0]
    w = norm.pdf(data.y[other], mean, noise)
    w /= w.sum()
    sd = np.sqrt(w @ (noise**2 + (mean - w @ mean) ** 2))
    error = 4.0 * np.sqrt((w**2).sum())
    assert loo.mean[i] == pytest.approx(w @ mean, abs=error * sd)
    assert loo.sd[i] == pytest.approx(sd, rel=error)
    assert loo.pit[i] == pytest.approx(w @ norm.cdf(data.y[i], mean, noise), abs=error)
    density = w @ norm.pdf(data.y[i], mean, noise)
    assert loo.log_density[i] == pytest.approx(np.log(density), abs=2.0 * error)
