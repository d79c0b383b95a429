"""Power-scaling against conjugate posteriors, of which the scaled ones are known."""

from dataclasses import dataclass

import numpy as np
import pytest
from scipy.stats import norm

from muntin.surrogate.hyperparameters import Posterior
from muntin.surrogate.power_scaling import (
    ALPHAS,
    cumulative_distance,
    prior_scaled,
    sensitivity,
)


@dataclass(frozen=True)
class Given:
    """Log evidence (S,) of nodes, as a fit has it."""

    log: np.ndarray


def conjugate(where, precision, nodes=4001):
    """eta ~ N(0, 1) prior and a normal likelihood at `where`, on a grid of nodes."""
    eta = np.linspace(-8.0, 8.0, nodes)[:, None]
    log = -0.5 * precision * (eta[:, 0] - where) ** 2
    log_w = log - 0.5 * eta[:, 0] ** 2
    return Posterior(Given(log), eta, log_w - np.logaddexp.reduce(log_w), 0.0, 0.0, 0.0)


@pytest.mark.parametrize("alpha", ALPHAS)
def test_prior_scaled_is_the_conjugate_posterior(alpha):
    posterior = conjugate(1.5, 3.0)
    w, eta = prior_scaled(posterior, alpha), posterior.eta[:, 0]
    assert w @ eta == pytest.approx(3.0 * 1.5 / (3.0 + alpha), abs=1e-9)
    assert w @ eta**2 - (w @ eta) ** 2 == pytest.approx(1.0 / (3.0 + alpha), abs=1e-9)


def distance(p, q, x):
    """The distance of two distribution functions, integrated by its definition."""
    P, Q = p.cdf(x), q.cdf(x)
    middle = 0.5 * (P + Q)
    both = sum(np.where(R > 0.0, R * np.log2(np.maximum(R, 1e-300) / middle), 0.0) for R in (P, Q))
    return np.sqrt(np.trapezoid(both, x) / np.trapezoid(P + Q, x))


def test_the_distance_follows_its_definition():
    """Kallioinen et al. 2024, section 2.3, by quadrature over two normal laws."""
    x = np.linspace(-8.0, 8.0, 4001)
    p, q = norm(0.2, 1.0), norm(0.9, 0.7)
    weights = [law.pdf(x) / law.pdf(x).sum() for law in (p, q)]
    found = cumulative_distance(x[:, None], *(w[:, None] for w in weights))[0]
    mirrored = distance(norm(-0.2, 1.0), norm(-0.9, 0.7), x)
    assert found == pytest.approx(max(distance(p, q, x), mirrored), rel=2e-3)


def test_the_distance_has_no_sign_and_is_nought_for_the_same():
    rng = np.random.default_rng(3)
    x, w, v = rng.normal(size=(40, 2)), rng.dirichlet(np.ones(40)), rng.dirichlet(np.ones(40))
    w, v = w[:, None], v[:, None]
    assert cumulative_distance(x, w, w) == pytest.approx([0.0, 0.0], abs=1e-9)
    assert cumulative_distance(x, w, v) == pytest.approx(cumulative_distance(-x, w, v))
    assert cumulative_distance(x, w, v) == pytest.approx(cumulative_distance(x, v, w))
    assert np.all(cumulative_distance(x, w, v) <= 1.0)


def test_conflict_is_both_sensitivities():
    # Far apart and equally sure; agreeing with much data; no data.
    apart, agreeing, none = (
        sensitivity(conjugate(where, precision))
        for where, precision in ((6.0, 1.0), (0.0, 400.0), (0.0, 1e-9))
    )
    assert apart.conflict.all()
    assert apart.place[0] == pytest.approx(3.0, abs=1e-3)
    assert not agreeing.conflict.any()
    assert agreeing.prior[0] < 0.01
    assert not none.conflict.any()
    assert none.likelihood[0] < 1e-4
    assert none.prior[0] > 0.05
