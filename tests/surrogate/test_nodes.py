"""Nodes: moments against dense conditioning, and what taking, mixing and lightening must keep."""

from functools import cache

import numpy as np
import pytest

from muntin.surrogate import nodes
from muntin.surrogate.fit import fit_surrogate
from muntin.surrogate.nodes import Surface, mixture
from tests.surrogate.problems import (
    COLUMNS,
    model_of,
    priors,
    reading_covariance,
    readings,
    surface_covariances,
)

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])
ROWS, OTHERS = 5, 4


@cache
def surface(name, kind="fraction"):
    data = readings(51, kind, n=16, inside=(2,), scale=(3,) if kind == "fraction" else ())
    return fit_surrogate(name, data, kind, COLUMNS, priors(kind), 1)


def points(rows, seed):
    return np.random.default_rng(seed).uniform(-1.3, 1.3, (rows, len(COLUMNS.factor)))


@NAMES
def test_moments_and_covariance_are_those_of_dense_conditioning(name):
    """Every node of the identity link: f(x) given y by the plain normal formulas."""
    data = readings(51, "real", n=16, inside=(2,), scale=())
    fit = surface(name, "real")
    model, X, Z = model_of(name, data, "real"), points(ROWS, 1), points(OTHERS, 2)
    part = fit.surface.parts[0]
    mean, variance = fit.surface.moments(X)
    covariance = fit.surface.covariance(X, Z)
    noise = part.errors.noise
    for s in (0, len(part) // 2, len(part) - 1):
        theta = fit.theta[np.argmin(np.abs(np.exp(fit.theta[:, 0]) - noise[s]))][None]
        own = model.layout.family(theta)[0]
        K = reading_covariance(model, theta, data)
        kx = surface_covariances(model.family, own, X, data.X)
        kz = surface_covariances(model.family, own, Z, data.X)
        expected = priors("real").mean + kx @ np.linalg.solve(K, data.y - priors("real").mean)
        spread = surface_covariances(model.family, own, X, X) - kx @ np.linalg.solve(K, kx.T)
        crossed = surface_covariances(model.family, own, X, Z) - kx @ np.linalg.solve(K, kz.T)
        assert mean[s] == pytest.approx(expected, abs=1e-6)
        assert variance[s] == pytest.approx(np.diag(spread), abs=1e-6)
        assert covariance[s] == pytest.approx(crossed, abs=1e-6)


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_the_diagonal_of_the_covariance_is_the_variance(name, kind):
    post, X = surface(name, kind).surface, points(ROWS, 3)
    _, variance = post.moments(X)
    covariance = post.covariance(X, X)
    assert covariance.shape == (len(post.weights), ROWS, ROWS)
    assert np.diagonal(covariance, axis1=1, axis2=2) == pytest.approx(variance, abs=1e-9)
    assert covariance == pytest.approx(np.swapaxes(covariance, 1, 2), abs=1e-9)
    assert np.linalg.eigvalsh(covariance).min() > -1e-9


@NAMES
def test_long_tables_are_worked_off_in_pieces(name, monkeypatch):
    post, X = surface(name).surface, points(23, 4)
    whole = post.moments(X)
    monkeypatch.setattr(nodes, "_CHUNK", 5 * len(post.weights) * 16)
    for all_at_once, in_pieces in zip(whole, post.moments(X), strict=True):
        assert in_pieces == pytest.approx(all_at_once, abs=1e-12)


def mixed():
    shares = np.array([0.3, 0.7])
    return mixture([surface("gp").surface, surface("quadratic").surface], shares), shares


def test_a_mixture_is_its_parts_side_by_side():
    both, shares = mixed()
    gp, quadratic = surface("gp").surface, surface("quadratic").surface
    X, Z = points(ROWS, 5), points(OTHERS, 6)
    assert both.weights.sum() == pytest.approx(1.0)
    assert both.weights[: len(gp.weights)] == pytest.approx(shares[0] * gp.weights)
    for whole, a, b in zip(both.moments(X), gp.moments(X), quadratic.moments(X), strict=True):
        assert np.array_equal(whole, np.concatenate([a, b]))
    parts = [gp.covariance(X, Z), quadratic.covariance(X, Z)]
    assert np.array_equal(both.covariance(X, Z), np.concatenate(parts))
    for field in ("noise", "inside", "scale", "ceiling"):
        own = [getattr(s.errors, field) for s in (gp, quadratic)]
        assert np.array_equal(getattr(both.errors, field), np.concatenate(own))
    assert both.link == "logit"


def test_thresholds_are_where_each_nodes_process_mean_is_a_value():
    both, _ = mixed()
    thresholds, ceiling = both.thresholds(0.7), both.errors.ceiling
    assert thresholds.shape == (len(both.weights), 1)
    assert ceiling / (1.0 + np.exp(-thresholds[:, 0])) == pytest.approx(np.full(len(ceiling), 0.7))
    assert (both.thresholds(float(ceiling.max())) == np.inf).any()


def test_a_part_without_a_share_is_left_out():
    gp, quadratic = surface("gp").surface, surface("quadratic").surface
    alone = mixture([gp, quadratic], np.array([0.0, 1.0]))
    assert alone.parts == quadratic.parts
    assert np.array_equal(alone.weights, quadratic.weights)


def test_taking_nodes_takes_their_moments_and_errors():
    both, _ = mixed()
    first = len(surface("gp").surface.weights)
    X, Z = points(ROWS, 7), points(OTHERS, 8)
    for index in ([1, 4, first - 1, first, first + 3], [0, 2], [first + 1]):
        index = np.array(index)
        weights = np.full(len(index), 1.0 / len(index))
        some = both.take(index, weights)
        assert np.array_equal(some.weights, weights)
        for mine, all_of_them in zip(some.moments(X), both.moments(X), strict=True):
            assert mine == pytest.approx(all_of_them[index], abs=1e-12)
        assert some.covariance(X, Z) == pytest.approx(both.covariance(X, Z)[index], abs=1e-12)
        assert np.array_equal(some.errors.noise, both.errors.noise[index])
        assert np.array_equal(some.errors.scale, both.errors.scale[index])
        assert np.array_equal(some.errors.inside, both.errors.inside[index])
        assert np.array_equal(some.errors.ceiling, both.errors.ceiling[index])


@pytest.mark.parametrize("most", [1, 7, 30])
def test_a_lightened_surface_keeps_each_node_as_often_as_it_weighs(most):
    both, _ = mixed()
    light = both.lightened(most)
    assert len(light.weights) <= most
    assert light.weights.sum() == pytest.approx(1.0)
    noise = both.errors.noise
    for weight, sd in zip(light.weights, light.errors.noise, strict=True):
        node = int(np.flatnonzero(noise == sd)[0])
        # Systematic resampling: a node of weight w is picked floor(most w) or one more times.
        assert abs(weight * most - both.weights[node] * most) < 1.0
    heavy = both.weights * most >= 1.0
    assert set(noise[heavy]) <= set(light.errors.noise)


def test_a_surface_that_is_light_enough_stays_as_it_is():
    both, _ = mixed()
    assert both.lightened(len(both.weights)) is both


def test_the_variance_is_never_nought():
    """Far inside repeated exact readings rounding must not turn a variance negative."""
    data = readings(52, "real", n=9, inside=(), scale=(), with_sd=False)
    narrow = priors("real").with_overrides({"noise_sd": (1e-5, 1e-6)})
    fit = fit_surrogate("gp", data, "real", COLUMNS, narrow, 1)
    _, variance = fit.surface.moments(data.X)
    assert (variance > 0.0).all()
    assert isinstance(fit.surface, Surface)
