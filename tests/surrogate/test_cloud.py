"""The cloud of draws against the exact posterior, written out apart from the engine."""

from dataclasses import replace

import numpy as np
import pytest

from muntin.surrogate import cloud as cloud_file
from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.cloud import DRAWS, _around, _log_likelihood, _weighed, cloud_of
from muntin.surrogate.evidence import Model
from muntin.surrogate.fit import _surface, family_of, fit_stack
from muntin.surrogate.hyperparameters import integrate
from muntin.surrogate.nodes import mixture
from muntin.window.probability import Target, mean_meets
from tests.benchmarks.trials import (
    both_errors,
    censored,
    few_wells,
    fraction,
    near_ceiling,
    real,
    scale_error,
    set_with_errors,
    spread,
)
from tests.surrogate.exact import exact_node, least_latent, log_likelihood, maps


def modelled(trial, name, nodes=16):
    """The model of a trial and its posterior on few nodes."""
    link = "identity" if trial.kind == "real" else "logit"
    model = Model(family_of(name, trial.columns, trial.priors), collapse(trial.readings), link)
    return model, integrate(model, 1, nodes=nodes)


@pytest.mark.parametrize(
    ("make", "name"),
    [
        (few_wells, "quadratic"),
        (both_errors, "gp"),
        (both_errors, "quadratic"),
        (censored, "gp"),
        (set_with_errors, "gp"),
    ],
)
def test_likelihood_of_draws_is_the_one_written_out_apart(make, name):
    """But for a constant of the node."""
    trial = make()
    model, posterior = modelled(trial, name)
    if trial.setting is not None:
        model = replace(model, wander=np.linspace(0.0, 0.02, len(model.cells)))
    evidence = posterior.evidence
    for k in np.argsort(-posterior.log_weights)[:3]:
        node = np.full(40, k)
        w, _ = _around(model, evidence, node, np.random.default_rng(1))
        theta = evidence.theta[[k]]
        latents, _, _ = maps(model, theta, trial.grid[:1])
        width = latents.shape[1]
        own = w[:, :width] @ latents.T
        ours = _log_likelihood(model, evidence, node, w)
        away = ours - log_likelihood(model, theta, own, w[:, width:])
        assert np.ptp(ours) > 1.0
        assert np.ptp(away) < 1e-5


@pytest.mark.parametrize(("make", "name"), [(few_wells, "quadratic"), (near_ceiling, "gp")])
def test_probabilities_are_nearer_to_the_exact_ones_than_those_of_the_nodes(make, name):
    """At the same nodes, weighted by their exact evidences."""
    trial = make()
    model, posterior = modelled(trial, name, nodes=32)
    weights, X = np.exp(posterior.log_weights), trial.grid[::7]
    rng, exact, total = np.random.default_rng(3), np.zeros(len(X)), 0.0
    for k in np.flatnonzero(weights > 1e-4):
        least = least_latent(model, posterior.evidence.theta[[k]], trial.target)
        node = exact_node(model, posterior, k, X, rng, 8192)
        weight = weights[k] * np.exp(node.log_evidence - posterior.evidence.log[k])
        exact, total = exact + weight * node.above(least), total + weight
    exact /= total
    cloud = cloud_of(model, posterior, "logit", DRAWS, 1)
    nodes, target = _surface(model, posterior.evidence, weights, "logit"), Target(low=trial.target)
    off, plain = (np.abs(mean_meets(s, tuple(s.latent(X)), target) - exact) for s in (cloud, nodes))
    assert cloud.weights.sum() == pytest.approx(1.0)
    assert off.max() < 0.01
    assert off.max() < 0.75 * plain.max()
    assert off.mean() < 0.8 * plain.mean()


def test_draws_are_the_cells_latent_values():
    """At the conditions of the cells f is root times w, spread by a fiftieth of the node's law."""
    trial = scale_error()
    model, posterior = modelled(trial, "gp")
    part = cloud_of(model, posterior, "logit", 2000, 1).parts[0]
    mean, variance = part.moments(model.cells.X)
    weights = np.exp(posterior.log_weights)
    keep = np.flatnonzero(weights * 2000 >= 0.5)
    root = posterior.evidence.root[keep]
    f = np.einsum("nur,nr->nu", root[part.node], part.drawn) + model.family.priors.mean
    np.testing.assert_allclose(mean, f, atol=1e-5)
    V = posterior.evidence.approximation.V[keep][:, : root.shape[2], : root.shape[2]]
    own = np.einsum("sur,srt,sut->su", root, V, root)[part.node]
    np.testing.assert_allclose(variance, 0.02 * own, rtol=0.02)


@pytest.mark.parametrize("name", ["gp", "quadratic"])
def test_nodes_about_draws(name):
    model, posterior = modelled(few_wells(), name)
    part = cloud_of(model, posterior, "logit", 500, 1).parts[0]
    X, some = np.array([[0.1, -0.3], [0.8, 0.9]]), np.array([3, 4, 200])
    few = part.take(some)
    for ours, every in zip(few.latent(X), part.latent(X), strict=True):
        np.testing.assert_allclose(ours, every[some], rtol=1e-9)
    variance = np.diagonal(few.covariance(X, X), axis1=1, axis2=2)
    np.testing.assert_allclose(variance, few.latent(X).variance, rtol=1e-3, atol=1e-6)
    assert few.slopes(X).shape == (3, 2, 2)
    np.testing.assert_array_equal(few.errors.noise, part.errors.noise[some])
    assert len(few.given) == len(set(part.node[some])) < len(part.given)


def test_weights_within_a_node():
    """A weight counts for sqrt(n) times the mean at most (Ionides 2008), in the mean as well."""
    high = np.log(60.0)
    log_w = np.array([high, *np.zeros(15), 700.0, 700.0])
    shares, log_mean = _weighed(log_w, np.array([16, 2]))
    most = 75.0 / 4.0
    expected = [most / (most + 15.0), *np.full(15, 1.0 / (most + 15.0)), 0.5, 0.5]
    np.testing.assert_allclose(shares, expected)
    np.testing.assert_allclose(log_mean, [np.log((most + 15.0) / 16.0), 700.0])


def test_a_node_counts_by_its_exact_evidence():
    """Held to importance sampling apart from the engine, where the approximation is some way off:
    what the weights of the nodes gain by the draws is what their evidences lack.
    """
    trial = set_with_errors()
    model, posterior = modelled(trial, "gp", nodes=8)
    model = replace(model, wander=np.full(len(model.cells), 0.04))
    posterior = integrate(model, 1, nodes=8)
    cloud = cloud_of(model, posterior, "logit", 100_000, 1)
    weights = np.exp(posterior.log_weights)
    keep = np.flatnonzero(weights * 100_000 >= 0.5)
    found = np.log(np.bincount(cloud.parts[0].node, cloud.weights) / weights[keep])
    rng, exact = np.random.default_rng(4), []
    for k in keep:
        node = exact_node(model, posterior, k, trial.grid[:1], rng, 32_768)
        exact.append(node.log_evidence - posterior.evidence.log[k])
    likely = weights[keep] > 0.02
    off, away = np.array(exact)[likely], (found - exact)[likely]
    assert off.std() > 0.04
    assert away.std() < 0.4 * off.std()


def test_draws_are_shared_out_by_weight_and_seeded():
    model, posterior = modelled(few_wells(), "quadratic")
    first, again, other = (
        cloud_of(model, posterior, "logit", 4000, seed).parts[0] for seed in (1, 1, 2)
    )
    np.testing.assert_array_equal(first.drawn, again.drawn)
    assert not np.array_equal(first.drawn, other.drawn)
    weights = np.exp(posterior.log_weights)
    weights = weights[weights * 4000 >= 0.5]
    counts = np.bincount(first.node)
    likely = weights / weights.sum() * 4000 > 20
    np.testing.assert_allclose(counts[likely], 4000 * weights[likely] / weights.sum(), atol=1.0)


def test_no_cloud_where_the_nodes_are_exact():
    model, posterior = modelled(real(), "gp")
    assert cloud_of(model, posterior, "identity", DRAWS, 1) is None


def test_no_cloud_of_many_latent_values():
    rng = np.random.default_rng(5)
    X = spread(44, rng)
    readings = Readings(X=X, y=np.clip(0.5 + 0.3 * X[:, 0], 0.0, 1.0), sd=np.zeros(44))
    trial = fraction("many", readings)
    model, posterior = modelled(trial, "quadratic", nodes=8)
    assert len(model.cells.X) > 40
    assert cloud_of(model, posterior, "logit", DRAWS, 1) is None


def test_no_cloud_of_uneven_weights(monkeypatch):
    model, posterior = modelled(few_wells(), "quadratic")
    monkeypatch.setattr(cloud_file, "_LEAST_EFFECTIVE", 0.99)
    assert cloud_of(model, posterior, "logit", 1000, 1) is None


@pytest.mark.slow
def test_mixtures_join_their_clouds():
    trial = few_wells()
    surfaces = [
        fit_stack((name,), trial.readings, trial.kind, trial.columns, trial.priors, 1).surface
        for name in ("gp", "quadratic")
    ]
    shares, target = np.array([0.3, 0.7]), Target(low=trial.target)
    joined = mixture(surfaces, shares).cloud
    p, *each = (
        mean_meets(s, s.moments(trial.grid), target) for s in (joined, *(s.cloud for s in surfaces))
    )
    np.testing.assert_allclose(p, shares @ np.array(each), atol=1e-9)
    assert mixture([surfaces[0], replace(surfaces[1], cloud=None)], shares).cloud is None


def test_a_stack_draws_as_many_as_the_shares_ask():
    trial = few_wells()
    given = (trial.readings, trial.kind, trial.columns, trial.priors, 1)
    stack = fit_stack(("gp", "quadratic"), *given)
    parts = [len(part) for part in stack.surface.cloud.parts]
    np.testing.assert_allclose(parts, DRAWS * stack.shares[stack.shares > 0.0], atol=800)
