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
        p.process_sd,
        p.length_scale,
        p.length_scale,
    )
    assert len(layout) == 7


def test_every_part_finds_its_hyperparameters(layout):
    values = np.random.default_rng(1).uniform(0.1, 3.0, (NODES, len(layout)))
    theta = np.log(values)
    assert layout.noise(theta) == pytest.approx(values[:, 0])
    assert layout.inside_sd(theta) == pytest.approx(values[:, 1:3])
    assert layout.scale_sd(theta) == pytest.approx(values[:, 3:4])
    assert layout.family(theta) == pytest.approx(values[:, 4:])


def test_standard_coordinates_are_prior_sds_from_the_prior_median(layout):
    eta = np.zeros((NODES, len(layout)))
    eta[1], eta[2] = 1.0, -2.0
    medians = np.array([p.median for p in layout.priors])
    log_sds = np.array([p.log_sd for p in layout.priors])
    assert np.exp(layout.theta(eta)) == pytest.approx(
        np.stack([medians, medians * np.exp(log_sds), medians * np.exp(-2.0 * log_sds)])
    )
