"""The transform of isolated wells, whose cavity is wide against the noise."""

import numpy as np
import pytest
from scipy.special import expit
from scipy.stats import norm

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.loo import leave_one_out
from tests.surrogate.problems import model_of, settled

NOISE = 0.02


@pytest.mark.parametrize("kind", ["real", "fraction"])
@pytest.mark.parametrize("seed", range(5))
def test_transform_of_isolated_wells_agrees_with_a_dense_integral(kind, seed):
    rng = np.random.default_rng(seed)
    X = rng.uniform(-1, 1, (7, 3))
    f = X @ [2, 1, -1.0] + 0.5
    y = (f if kind == "real" else expit(f)) + rng.normal(0, NOISE, 7)
    data = Readings(X=X, y=y, sd=np.zeros(7))
    model = model_of("gp", data, kind, columns=Columns.plain(3))
    theta = model.layout.theta(np.zeros((1, len(model.layout))))
    theta[0, 0] = np.log(NOISE)
    evidence, lik = settled(model, theta), model.likelihood(theta)
    prior = evidence.prior_variance(model.cells)
    loo = leave_one_out(model.cells, lik, evidence.approximation, np.zeros(1), prior)
    cavity = evidence.approximation.cavity
    z = np.linspace(-9, 9, 40_001)
    w = np.exp(-0.5 * z * z) / np.exp(-0.5 * z * z).sum()
    for i, k in enumerate(model.cells.cell):
        g = lik.process_mean((cavity.u[0, k] + np.sqrt(cavity.uu[0, k]) * z)[None])[0]
        assert loo.pit[i] == pytest.approx(w @ norm.cdf((y[i] - g) / NOISE), abs=0.005)
