"""Joint draws of a surface: their law is that of the nodes, or of the cloud, they come from."""

from dataclasses import replace

import numpy as np
import pytest

import muntin
from muntin.surrogate.joint_draws import draw_jointly
from tests.studies import PH, SALT, read, spread, written

DRAWS = 4000
# Coded conditions: anchors spread over the range, and others that are asked between them.
GRID = np.stack(np.meshgrid(np.linspace(-1, 1, 7), np.linspace(-1, 1, 7)), -1).reshape(-1, 2)
ASKED = np.array([[0.11, -0.42], [-0.9, 0.77], [0.52, 0.5]])


@pytest.fixture(scope="module", params=["gp", "quadratic"])
def surface(request, tmp_path_factory):
    folder = tmp_path_factory.mktemp("draws")
    plates = [read(spread([PH, SALT], 9, seed), seed) for seed in (1, 2)]
    return muntin.assess(written(folder, plates), request.param).surfaces["recovery"]


def law_of(surface, X):
    """Mean (n,) and covariance (n, n) of f over all nodes."""
    mean = surface.moments(X)[0]
    middle = surface.weights @ mean
    away = mean - middle
    return middle, np.einsum(
        "s,snm->nm", surface.weights, surface.covariance(X, X) + away[:, :, None] * away[:, None]
    )


def test_mean_and_covariance_are_those_of_the_nodes(surface):
    plain = replace(surface, cloud=None)
    f = draw_jointly(plain, GRID, DRAWS, np.random.default_rng(1)).at(ASKED)
    assert f.shape == (DRAWS, len(ASKED))
    mean, covariance = law_of(plain, ASKED)
    sd = np.sqrt(np.diag(covariance))
    # Four standard errors of a mean and of a covariance of Gaussian draws.
    assert (np.abs(f.mean(0) - mean) < 4.0 * sd / np.sqrt(DRAWS)).all()
    error = 4.0 * np.sqrt(2.0 / DRAWS) * np.outer(sd, sd)
    assert (np.abs(np.cov(f.T) - covariance) < error + 0.01 * np.outer(sd, sd)).all()


def test_mean_and_sd_are_those_of_the_cloud(surface):
    assert surface.cloud is not None
    f = draw_jointly(surface, GRID, DRAWS, np.random.default_rng(1)).at(ASKED)
    mean, variance = surface.cloud.moments(ASKED)
    w = surface.cloud.weights
    middle = w @ mean
    sd = np.sqrt(w @ (variance + (mean - middle) ** 2))
    assert (np.abs(f.mean(0) - middle) < 4.0 * sd / np.sqrt(DRAWS)).all()
    np.testing.assert_allclose(f.std(0), sd, rtol=0.08)


def test_a_draw_is_one_function(surface):
    draws = draw_jointly(surface, GRID, 50, np.random.default_rng(2))
    both = draws.at(np.concatenate([ASKED, GRID]))
    np.testing.assert_allclose(both[:, :3], draws.at(ASKED), rtol=1e-9, atol=1e-9)
    # Smooth: a thousandth of the range further on hardly anything has changed.
    moved = draws.at(ASKED + 1e-3)
    assert np.abs(moved - both[:, :3]).max() < 0.05
    assert both[:, :3].std(axis=0).min() > 10.0 * np.abs(moved - both[:, :3]).mean()


def test_errors_belong_to_their_draws(surface):
    plain = replace(surface, cloud=None)
    draws = draw_jointly(plain, GRID, 500, np.random.default_rng(3))
    errors = draws.errors
    assert errors.noise.shape == (500,)
    assert errors.scale.shape == (500, 1)
    assert errors.noise.mean() == pytest.approx(plain.weights @ plain.errors.noise, rel=0.03)
    wander = draws.wander(ASKED, np.full((3, 2), 0.1))
    expected = plain.weights @ plain.wander(ASKED, np.full((3, 2), 0.1))
    np.testing.assert_allclose(wander.mean(0), expected, rtol=0.1)


def test_a_draw_keeps_the_errors_of_its_node(surface):
    plain = replace(surface, cloud=None)
    mean = plain.moments(ASKED)[0][:, 0]
    ends = np.sort([mean.argmin(), mean.argmax()])
    two = plain.take(ends, np.array([0.5, 0.5]))
    draws = draw_jointly(two, GRID, 2000, np.random.default_rng(6))
    f, noise = draws.at(ASKED)[:, 0], draws.errors.noise
    sd = np.sqrt(two.moments(ASKED)[1][:, 0])
    for k, (middle, own) in enumerate(zip(mean[ends], two.errors.noise, strict=True)):
        mine = f[noise == own]
        assert len(mine) == 1000
        assert mine.mean() == pytest.approx(middle, abs=4.0 * sd[k] / np.sqrt(1000))


def test_the_same_generator_gives_the_same_draws(surface):
    one, other = (
        draw_jointly(surface, GRID, 30, np.random.default_rng(4)).at(ASKED) for _ in range(2)
    )
    np.testing.assert_array_equal(one, other)
    assert not np.array_equal(
        one, draw_jointly(surface, GRID, 30, np.random.default_rng(5)).at(ASKED)
    )
