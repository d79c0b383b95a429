"""Gradients of the log evidence against central differences, and what the evidence must not see."""

from dataclasses import replace

import numpy as np
import pytest

from muntin.surrogate.coding import Choice, Coding, Continuous
from muntin.surrogate.evidence import joined, slope
from tests.surrogate.problems import log_normal, model_of, priors, readings, settled

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])
STEP = 1e-4


def differences(model, theta):
    steps = STEP * np.eye(theta.shape[1])
    sides = [settled(model, theta + d).log - settled(model, theta - d).log for d in steps]
    return np.stack(sides, axis=1) / (2.0 * STEP)


def case(name, kind, inside, scale, seed, n):
    model = model_of(name, readings(seed, kind, n=n, inside=inside, scale=scale), kind)
    theta = model.layout.theta(np.random.default_rng(5).normal(0.0, 0.5, (3, len(model.layout))))
    return model, theta


ERRORS = pytest.mark.parametrize(
    ("kind", "inside", "scale"),
    [
        ("real", (), ()),
        ("real", (2, 5), ()),
        ("fraction", (), ()),
        ("fraction", (4,), ()),
        ("fraction", (), (2,)),
        ("fraction", (2,), (2, 5)),
    ],
)


@NAMES
@ERRORS
@pytest.mark.usefixtures("fine_quadrature")
def test_the_slope_agrees_with_central_differences(name, kind, inside, scale):
    model, theta = case(name, kind, inside, scale, seed=21, n=24)
    gradient = slope(model, settled(model, theta))
    assert gradient.shape == theta.shape
    assert gradient == pytest.approx(differences(model, theta), abs=1e-4)


@NAMES
@ERRORS
def test_the_slope_in_use_is_good_enough_to_climb_by(name, kind, inside, scale):
    """32 points a cell leave 0.001 where wells are many; the search stops at 0.01 of a move."""
    model, theta = case(name, kind, inside, scale, seed=22, n=40)
    gradient = slope(model, settled(model, theta))
    assert gradient == pytest.approx(differences(model, theta), abs=0.002)


@NAMES
def test_the_evidence_of_one_reading_is_its_prior_predictive(name):
    data = readings(22, "real", n=1, inside=(1,), scale=())
    model = model_of(name, data, "real")
    theta = model.layout.theta(np.full((1, len(model.layout)), 0.5))
    noise, inside = model.layout.noise(theta)[0], model.layout.inside_sd(theta)[0, 0]
    own = model.layout.family(theta)[0]
    x, p = data.X[0], priors("real")
    if name == "gp":
        variance = p.mean_sd**2 + own[0] ** 2
    else:
        products = (x[0] * x[1]) ** 2 + (x[0] * x[2]) ** 2
        variance = p.mean_sd**2 + own[0] ** 2 * ((x**2).sum() + products) + own[1] ** 2 * x[0] ** 4
    total = variance + inside**2 + noise**2 + data.sd[0] ** 2
    expected = log_normal(data.y - p.mean, np.array([[total]]))
    assert settled(model, theta).log[0] == pytest.approx(expected, abs=1e-8)


@NAMES
@pytest.mark.parametrize("kind", ["real", "fraction"])
def test_the_order_of_choices_does_not_matter(name, kind):
    """Corners of a simplex are alike: permuting the names of the choices is a rotation."""
    rng = np.random.default_rng(23)
    coding = Coding((Continuous(low=0.0, high=1.0), Choice(levels=4)))
    level, choice = rng.random(18), rng.integers(0, 4, 18)
    data = readings(23, kind, n=18, inside=(), scale=())
    logs = []
    for order in ([0, 1, 2, 3], [2, 0, 3, 1]):
        named = replace(data, X=coding.code([level, np.array(order)[choice]]))
        model = model_of(name, named, kind, columns=coding.columns)
        theta = model.layout.theta(np.full((1, len(model.layout)), 0.1))
        logs.append(settled(model, theta).log[0])
    assert logs[0] == pytest.approx(logs[1], abs=1e-7)


def test_one_scale_error_is_as_good_as_two_that_share_its_variance():
    """Two errors over the same groups act as their sum."""
    data = readings(24, n=20, inside=(), scale=(3,))
    twice = replace(data, scale=(data.scale[0], data.scale[0]))
    one, two = model_of("gp", data), model_of("gp", twice)
    theta = one.layout.theta(np.full((1, len(one.layout)), 0.2))
    h = np.exp(theta[0, 1])
    split = np.concatenate([theta[:, :1], np.log([[0.6 * h, 0.8 * h]]), theta[:, 2:]], axis=1)
    assert settled(two, split).log[0] == pytest.approx(settled(one, theta).log[0], abs=1e-6)


def test_rounds_are_joined_in_order():
    model = model_of("quadratic", readings(25, n=15, inside=(2,), scale=(2,)))
    theta = model.layout.theta(np.random.default_rng(6).normal(0.0, 0.5, (5, len(model.layout))))
    whole = settled(model, theta)
    parts = joined([settled(model, theta[:2]), settled(model, theta[2:])])
    assert parts.log == pytest.approx(whole.log, abs=1e-6)
    assert slope(model, parts) == pytest.approx(slope(model, whole), abs=1e-4)
    assert np.array_equal(parts.theta, theta)
