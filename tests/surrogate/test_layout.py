import numpy as np
import pytest

from tests.surrogate.problems import model_of, priors, readings

NODES = 3


@pytest.fixture
def layout():
    return model_of("gp", readings(1, inside=(2, 4), scale=(3,))).layout


def test_the_order_is_noise_inside_scale_and_the_familys_own(layout):
    assert layout.names == (
        "noise_sd",
        "inside_error[0]",
        "inside_error[1]",
        "scale_error[0]",
        "ceiling_gap",
        "process_sd",
        "length_scale[0]",
        "length_scale[1]",
    )
    p = priors()
    assert layout.priors == (
        p.noise_sd,
        p.inside_error,
        p.inside_error,
        p.scale_error,
        p.ceiling_gap,
        p.process_sd,
        p.length_scale,
        p.length_scale,
    )
    assert len(layout) == 8


def test_every_part_finds_its_hyperparameters(layout):
    values = np.random.default_rng(1).uniform(0.1, 0.4, (NODES, len(layout)))
    theta = np.log(values)
    assert layout.noise(theta) == pytest.approx(values[:, 0])
    assert layout.inside_sd(theta) == pytest.approx(values[:, 1:3])
    assert layout.scale_sd(theta) == pytest.approx(values[:, 3:4])
    assert layout.ceiling_of(theta) == pytest.approx(1.0 - values[:, 4])
    assert layout.family(theta) == pytest.approx(values[:, 5:])


def test_a_ceiling_is_a_fractions_and_stays_above_a_half(layout):
    theta = np.log(np.full((1, len(layout)), 0.8))
    assert layout.ceiling_of(theta) == pytest.approx([0.5])
    real = model_of("gp", readings(1, "real", scale=()), "real").layout
    assert "ceiling_gap" not in real.names
    theta = np.log(np.full((NODES, len(real)), 0.3))
    assert np.array_equal(real.ceiling_of(theta), np.ones(NODES))
    assert real.family(theta).shape == (NODES, 3)


def test_standard_coordinates_are_prior_sds_from_the_prior_median(layout):
    eta = np.zeros((NODES, len(layout)))
    eta[1], eta[2] = 1.0, -2.0
    medians = np.array([p.median for p in layout.priors])
    log_sds = np.array([p.log_sd for p in layout.priors])
    assert np.exp(layout.theta(eta)) == pytest.approx(
        np.stack([medians, medians * np.exp(log_sds), medians * np.exp(-2.0 * log_sds)])
    )
