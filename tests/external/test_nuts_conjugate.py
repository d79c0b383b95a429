"""The sampler against the closed-form posterior of a conjugate quadratic.

Data and answers as in test_conjugate.py: coefficients N((80, 0, ...), sigma^2 diag(100, 25, 4, 4,
4, 4, 4)) given sigma, sigma^2 inverse gamma (2, 0.5). Our priors do not tie the coefficients to
sigma, so they are given the conjugate sds at sigma = 0.4 and the draws are weighted by the ratio of
the conjugate prior to ours; the likelihood is the same.
"""

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import invgamma, norm

from muntin.surrogate.nuts import Nuts, sample
from muntin.surrogate.priors import LogNormal
from tests.external.flat import Chosen, flat_model

pytestmark = pytest.mark.slow

DATA = Path(__file__).parent / "data"
TERMS = ((), (2,), (0,), (1,), (0, 1), (0, 0), (1, 1))
SD = np.array([10.0, 5.0, 2.0, 2.0, 2.0, 2.0, 2.0])
# Near the conjugate prior of sigma times that of the coefficients found, so that weights are even.
NOISE = LogNormal(0.52, 0.25)


@dataclass(frozen=True)
class Fixed(Chosen):
    """Coefficient sds of the conjugate prior at sigma = 0.4."""

    def coefficient_sd(self, own):
        return 0.0 * own[:, :1] + 0.4 * SD


@pytest.fixture(scope="module")
def weighted():
    """Draws of the coefficients (S, 7) and of sigma (S,), with weights (S,)."""
    data = pd.read_csv(DATA / "reactor_two_blocks.csv")
    X = np.column_stack(
        [(data["time"] - 85.0) / 5.0, (data["temp"] - 175.0) / 5.0, data["block"] - 1.0]
    )
    plain = flat_model(X, data["yield_"], 1.0, TERMS)
    priors = replace(plain.family.priors, mean=80.0, noise_sd=NOISE)
    model = replace(plain, family=Fixed(plain.family.columns, priors, chosen=TERMS))
    draws = sample(model, 1, Nuts(draws=5000), near=np.full(len(model.cells.X), 80.0))
    sigma = np.exp(draws.theta[:, 0])
    w = draws.w.reshape(len(draws), -1)
    own = norm.logpdf(np.log(sigma), np.log(NOISE.median), NOISE.log_sd) - np.log(sigma)
    own += norm.logpdf(w).sum(1) - np.log(0.4 * SD).sum()
    target = invgamma.logpdf(sigma**2, 2.0, scale=0.5) + np.log(2.0 * sigma)
    target += norm.logpdf(0.4 * SD * w, 0.0, sigma[:, None] * SD).sum(1)
    weights = np.exp(target - own - (target - own).max())
    return 0.4 * SD * w + 80.0 * np.eye(7)[0], sigma, weights / weights.sum()


def test_weights_are_even_enough(weighted):
    weights = weighted[2]
    assert 1.0 / (weights**2).sum() > 0.3 * len(weights)


def test_posterior_means(weighted):
    """Within 4 errors of weighted draws, of which about every second counts as independent."""
    coefficients, _, weights = weighted
    expected = [84.015765, -4.401476, 0.904278, 0.560203, 0.117647, -1.260191, -0.896451]
    mean = weights @ coefficients
    sd = np.sqrt(weights @ (coefficients - mean) ** 2)
    error = np.sqrt(2.0 * (weights**2).sum())
    assert np.abs(mean - expected).max() < 0.01
    assert (np.abs(mean - expected) < 4.0 * error * sd).all()


def test_posterior_of_the_noise(weighted):
    """sigma^2 is inverse gamma (9, 1.526257)."""
    _, sigma, weights = weighted
    error = 4.0 * np.sqrt(2.0 * (weights**2).sum())
    for level in (0.1, 0.5, 0.9):
        limit = invgamma.ppf(level, 9.0, scale=1.526257)
        assert weights @ (sigma**2 < limit) == pytest.approx(level, abs=0.5 * error)


@pytest.mark.parametrize(
    ("point", "mean", "p_latent", "p_new"),
    [
        ((0.372295, 0.334380), 84.279490, 0.912208, 0.725755),
        ((0.0, 0.0), 84.015765, 0.531141, 0.513559),
        ((1.0, 1.0), 83.441250, 0.057542, 0.153920),
    ],
)
def test_probabilities_are_students_t(weighted, point, mean, p_latent, p_new):
    coefficients, sigma, weights = weighted
    a, b = point
    f = coefficients @ np.array([1.0, 0.0, a, b, a * b, a * a, b * b])
    error = 4.0 * np.sqrt(2.0 * (weights**2).sum())
    assert weights @ f == pytest.approx(mean, abs=0.25 * error)
    assert weights @ (f >= 84.0) == pytest.approx(p_latent, abs=0.5 * error)
    assert weights @ norm.sf(84.0, f, sigma) == pytest.approx(p_new, abs=0.5 * error)
