"""The conjugate normal-inverse-gamma quadratic, by integrating sigma over the engine's evidences.

Reactor data in two blocks (Myers, Montgomery & Anderson-Cook 2002, table 7.6); coefficients of
1, b2, x1, x2, x1 x2, x1^2, x2^2 are N((80, 0, ..., 0), sigma^2 diag(100, 25, 4, 4, 4, 4, 4)) given
sigma, and sigma^2 is inverse gamma (2, 0.5). The answers are closed forms, computed; the log
marginal likelihood also equals scipy's multivariate t.
"""

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.special import gammaln, logsumexp

from muntin.surrogate.evidence import evaluate
from muntin.window.probability import Target, mean_meets, well_meets
from tests.external.flat import Chosen, Flat, flat_model

DATA = Path(__file__).parent / "data"
# Columns 0 and 1 are x1 and x2; column 2 is 1 in block 2.
TERMS = ((), (2,), (0,), (1,), (0, 1), (0, 0), (1, 1))
GRID = np.exp(np.linspace(-2.6, 1.8, 500))


@dataclass(frozen=True)
class Scaled(Chosen):
    """Coefficient sds 10, 5, 2, 2, 2, 2, 2 times the node's process sd, which is set to sigma."""

    def coefficient_sd(self, own):
        return own[:, :1] * np.array([10.0, 5.0, 2.0, 2.0, 2.0, 2.0, 2.0])


@pytest.fixture(scope="module")
def integrated():
    """Log marginal likelihood and the surface over all sigmas."""
    data = pd.read_csv(DATA / "reactor_two_blocks.csv")
    X = np.column_stack(
        [(data["time"] - 85.0) / 5.0, (data["temp"] - 175.0) / 5.0, data["block"] - 1.0]
    )
    plain = flat_model(X, data["yield_"], 1.0, TERMS)
    family = Scaled(plain.family.columns, replace(plain.family.priors, mean=80.0), chosen=TERMS)
    model = replace(plain, family=family)
    theta = np.log(np.stack([GRID, GRID, GRID], axis=1))
    fit = Flat(model, evaluate(model, theta))
    variance, a, b = GRID**2, 2.0, 0.5
    # Inverse gamma in sigma^2; d sigma^2 = 2 sigma^2 d ln sigma.
    log_prior = a * np.log(b) - gammaln(a) - (a + 1.0) * np.log(variance) - b / variance
    step = np.log(GRID[1] / GRID[0])
    log_w = fit.evidence.log + log_prior + np.log(2.0 * variance * step)
    marginal = logsumexp(log_w)
    return marginal, fit.surface(np.exp(log_w - marginal))


def test_log_marginal_likelihood(integrated):
    assert integrated[0] == pytest.approx(-21.65145976, abs=1e-6)


def test_posterior_means(integrated):
    surface = integrated[1]
    nodes = surface.parts[0]
    mean = surface.weights @ nodes.mean + 80.0 * np.eye(7)[0]
    expected = [84.015765, -4.401476, 0.904278, 0.560203, 0.117647, -1.260191, -0.896451]
    assert mean == pytest.approx(expected, abs=1e-6)


@pytest.mark.parametrize(
    ("point", "mean", "p_latent", "p_new"),
    [
        ((0.372295, 0.334380), 84.279490, 0.912208, 0.725755),
        ((0.0, 0.0), 84.015765, 0.531141, 0.513559),
        ((1.0, 1.0), 83.441250, 0.057542, 0.153920),
    ],
)
def test_probabilities_are_students_t(integrated, point, mean, p_latent, p_new):
    """Student's t on 18 degrees of freedom, in block 1, of a yield of 84 or more."""
    surface = integrated[1]
    moments = surface.moments(np.array([[*point, 0.0]]))
    target = Target(low=84.0)
    assert (surface.weights @ moments[0])[0] == pytest.approx(mean, abs=1e-6)
    assert mean_meets(surface, moments, target)[0] == pytest.approx(p_latent, abs=1e-6)
    assert well_meets(surface, moments, target)[0] == pytest.approx(p_new, abs=1e-6)
