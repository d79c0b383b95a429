"""Setting errors in the noise: noisy-input regression (McHutchon & Rasmussen 2011)."""

from dataclasses import replace

import numpy as np
import pytest

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import Model
from muntin.surrogate.fit import family_of, fit_surrogate
from muntin.surrogate.priors import priors_of
from muntin.surrogate.wander import settled_wander

ONE = Columns.plain(1)
PRIORS = priors_of("real", (-2.0, 2.0))
SETTING = 0.1


def line(slope, seed=1, n=40, setting=SETTING, noise=0.02):
    """A straight line read at settings that were missed with sd `setting`."""
    rng = np.random.default_rng(seed)
    x = np.linspace(-1.0, 1.0, n)
    y = slope * (x + setting * rng.normal(size=n)) + noise * rng.normal(size=n)
    return Readings(
        X=x[:, None], y=y, sd=np.zeros(n), setting=np.full((n, 1), setting), plate=np.zeros(n, int)
    )


@pytest.mark.parametrize("name", ["gp", "quadratic"])
def test_slopes_agree_with_differences(name):
    data = replace(line(1.5), setting=np.zeros((40, 1)))
    surface = fit_surrogate(name, data, "real", ONE, PRIORS, 1).surface
    X, h = np.linspace(-0.9, 0.9, 7)[:, None], 1e-4
    above, below = surface.moments(X + h)[0], surface.moments(X - h)[0]
    slopes = surface.slopes(X)
    assert slopes.shape == (*above.shape, 1)
    assert slopes[..., 0] == pytest.approx((above - below) / (2.0 * h), rel=1e-5, abs=1e-6)


@pytest.mark.parametrize("name", ["gp", "quadratic"])
def test_the_wander_of_a_line_is_its_slope_times_the_setting_error(name):
    model = Model(family_of(name, ONE, PRIORS), collapse(line(1.5)), "identity")
    settled, start = settled_wander(model)
    assert start is not None
    # The fitted slope is uncertain by about 0.15 / sqrt(40 / 3).
    assert np.sqrt(settled.wander.mean()) == pytest.approx(1.5 * SETTING, abs=0.1 * SETTING)


def test_nothing_set_with_error_leaves_the_model_as_it_is():
    model = Model(
        family_of("gp", ONE, PRIORS),
        collapse(replace(line(1.5), setting=np.zeros((40, 1)))),
        "identity",
    )
    assert settled_wander(model) == (model, None)


def test_scatter_that_setting_errors_make_is_not_read_as_noise():
    """Sd of the reading itself: 0.02; of the scatter about the line: 0.15."""
    narrow = replace(PRIORS, noise_sd=replace(PRIORS.noise_sd, median=0.05))
    told = fit_surrogate("quadratic", line(1.5), "real", ONE, narrow, 1)
    untold = fit_surrogate(
        "quadratic", replace(line(1.5), setting=np.zeros((40, 1))), "real", ONE, narrow, 1
    )

    def noise(fit):
        return fit.surface.weights @ fit.surface.errors.noise

    assert noise(untold) == pytest.approx(0.15, abs=0.04)
    assert noise(told) < 0.5 * noise(untold)


def test_a_well_on_the_slope_wanders_more_than_one_on_the_plateau():
    """Readings of a steep edge: the latent variance is that of f, the reading's g'(f)^2 of it."""
    rng = np.random.default_rng(3)
    x = np.linspace(-1.0, 1.0, 24)
    setting = 0.05
    true = 1.0 / (1.0 + np.exp(-6.0 * (x + setting * rng.normal(size=24))))
    data = Readings(
        X=x[:, None],
        y=true + 0.01 * rng.normal(size=24),
        sd=np.zeros(24),
        setting=np.full((24, 1), setting),
    )
    model, _ = settled_wander(
        Model(family_of("gp", ONE, priors_of("fraction", (0.0, 1.0))), collapse(data), "logit")
    )
    # The latent slope is 6 everywhere; single wells tell it to about a quarter.
    steep = np.abs(x) < 0.5
    assert np.sqrt(model.wander[steep].mean()) == pytest.approx(6.0 * setting, rel=0.25)
    lik = model.likelihood(model.layout.theta(np.zeros((1, len(model.layout)))))
    added = lik.wandering(6.0 * x[None] - lik.offset)[0]
    assert added[np.abs(x).argmax()] < 0.05 * added[np.abs(x).argmin()]
