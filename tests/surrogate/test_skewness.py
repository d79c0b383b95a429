"""Skewness of the surface against the exact posterior of the same model by importance sampling."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import ndtr

from muntin.surrogate.assembly import nodes_of
from muntin.surrogate.cells import collapse
from muntin.surrogate.evidence import Model
from muntin.surrogate.fit import family_of
from muntin.surrogate.hyperparameters import integrate, log_prior
from muntin.surrogate.nodes import Surface
from muntin.surrogate.skewness import skew_of
from muntin.window.probability import Target, node_mean_meets, skewed_below
from tests.benchmarks.trials import few_wells, own_sd, scale_error
from tests.surrogate.exact import exact_node, least_latent

CASES = [
    (trial, name) for trial in (scale_error, few_wells, own_sd) for name in ("gp", "quadratic")
]


def approximated(trial, name):
    """The model, its posterior on few nodes, and nodes with their skew."""
    link = "identity" if trial.kind == "real" else "logit"
    family = family_of(name, trial.columns, trial.priors)
    model = Model(family, collapse(trial.readings), link)
    posterior = integrate(model, 1, nodes=16)
    evidence, approx = posterior.evidence, posterior.evidence.approximation
    own = evidence.root.shape[2]
    skew = skew_of(model.rows(evidence.theta), approx)
    mean, V = approx.mean[:, :own], approx.V[:, :own, :own]
    return model, posterior, nodes_of(model, evidence.theta, evidence.root, mean, V, skew)


@pytest.mark.parametrize(("make", "name"), CASES)
def test_skewness_and_probabilities_at_likely_nodes(make, name):
    """The first order tells the skewness of f to a third of its size, and the probabilities lie
    nearer to the exact ones than the Gaussian's.
    """
    trial = make()
    model, posterior, nodes = approximated(trial, name)
    X = trial.grid[::12]
    surface = Surface((nodes,), np.exp(posterior.log_weights), "logit")
    latent, rng = surface.latent(X), np.random.default_rng(0)
    found = node_mean_meets(surface, latent, Target(low=trial.target))
    gaussian = node_mean_meets(surface, latent[:2], Target(low=trial.target))
    off, plain, skews = [], [], []
    likely = posterior.evidence.log + log_prior(posterior.eta)
    for node in np.argsort(-likely)[:6]:
        exact = exact_node(model, posterior, node, X, rng, 4096)
        theta = posterior.evidence.theta[[node]]
        p = exact.above(least_latent(model, theta, trial.target_additive))
        mean = exact.weights @ exact.mean
        variance = exact.weights @ (exact.mean - mean) ** 2 + exact.left
        skew = exact.weights @ (exact.mean - mean) ** 3 / variance**1.5
        off.append(np.abs(found[node] - p))
        plain.append(np.abs(gaussian[node] - p))
        skews.append(np.stack([latent.skew[node], skew]))
    first, true = np.concatenate(skews, axis=1)
    assert np.abs(true).max() > 0.3
    assert np.abs(first - true).mean() < np.abs(true).mean() / 3.0
    assert np.mean(off) < 0.85 * np.mean(plain)
    assert np.max(off) < 0.75 * np.max(plain)


def test_a_gamma_law_is_told_from_its_skewness():
    """Gamma with shape 40: skewness 2 / sqrt(40); the next term is of the order of its square."""
    from scipy.stats import gamma

    z = np.linspace(-2.5, 2.5, 21)
    exact = gamma(40.0).cdf(40.0 + z * np.sqrt(40.0))
    told = skewed_below(z, np.full(21, 2.0 / np.sqrt(40.0)))
    assert np.abs(told - exact).max() < 0.006
    assert np.abs(ndtr(z) - exact).max() > 0.02


def test_readings_on_a_straight_scale_leave_no_skew():
    trial = scale_error()
    real = replace(trial, kind="real", readings=replace(trial.readings, scale=()))
    _, posterior, nodes = approximated(real, "gp")
    assert not posterior.evidence.approximation.skewed
    assert not nodes.latent(real.grid).skew.any()


@pytest.mark.parametrize("name", ["gp", "quadratic"])
def test_some_nodes_keep_their_skew(name):
    trial = few_wells()
    _, _, nodes = approximated(trial, name)
    index = np.array([1, 4, 7])
    part = nodes.take(index).latent(trial.grid)
    for some, every in zip(part, nodes.latent(trial.grid), strict=True):
        assert some == pytest.approx(every[index])
    assert part[:2] == pytest.approx(np.stack(nodes.take(index).moments(trial.grid)))
