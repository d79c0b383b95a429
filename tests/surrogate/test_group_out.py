"""Predictions of a group of readings against explicit conditioning and refits without it."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import norm

from muntin.surrogate.ahead import predict_ahead
from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.group_out import (
    leave_group_out,
    refit_group_out,
    silent,
)
from muntin.surrogate.hyperparameters import Posterior, integrate
from tests.surrogate.problems import model_of, reading_covariance, readings, settled

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])


def posterior_of(evidence, log_weights):
    return Posterior(evidence, np.zeros((len(log_weights), 1)), log_weights, 0.0, 1.0, 0.0)


@NAMES
def test_the_identity_link_agrees_with_dense_conditioning(name):
    """y_group given y_rest at two nodes; the weights are those given y over p(y_group | rest)."""
    data = readings(41, "real", n=26, inside=(3, 4), scale=())
    group = np.flatnonzero(data.inside[0] == 1)
    rest = np.flatnonzero(data.inside[0] != 1)
    model = model_of(name, data, "real")
    theta = model.layout.theta(np.random.default_rng(7).normal(0.0, 0.3, (2, len(model.layout))))
    weights = np.array([0.3, 0.7])
    posterior = posterior_of(settled(model, theta), np.log(weights))
    out = leave_group_out(model, posterior, group, np.inf)
    densities, below, shifts, zs = [], [], [], []
    for s in range(2):
        K = reading_covariance(model, theta[s : s + 1], data)
        pull = np.linalg.solve(K[np.ix_(rest, rest)], K[np.ix_(rest, group)])
        mean = model.family.priors.mean + (data.y[rest] - model.family.priors.mean) @ pull
        cov = K[np.ix_(group, group)] - K[np.ix_(group, rest)] @ pull
        away = data.y[group] - mean
        inverse = np.linalg.inv(cov)
        strength = inverse.sum()
        densities.append(
            np.exp(-0.5 * (away @ inverse @ away + np.linalg.slogdet(2.0 * np.pi * cov)[1]))
        )
        below.append(norm.cdf(away / np.sqrt(np.diag(cov))))
        shifts.append((inverse @ away).sum() / strength)
        zs.append((inverse @ away).sum() / np.sqrt(strength))
    w = weights / densities / (weights / densities).sum()
    assert w.min() > 0.02
    assert out.pit == pytest.approx(w @ np.array(below), abs=1e-5)
    assert out.shift == pytest.approx(w @ shifts, abs=1e-5)
    assert out.shift_pit == pytest.approx(w @ norm.cdf(zs), abs=1e-5)
    assert out.ess == pytest.approx(1.0 / (w**2).sum(), rel=1e-5)


@NAMES
def test_a_fraction_agrees_with_refits_without_the_group(name):
    """ln p(y_group | rest) is the log evidence with the group less that without it.

    The sites of the others stay where they were, which costs about 0.005 for each of the twenty
    readings of a group: nodes are weighed with errors of a tenth.
    """
    misses = []
    for seed in range(40, 46):
        rng = np.random.default_rng(seed)
        x, groups = rng.uniform(-1.0, 1.0, 60), rng.integers(0, 3, 60)
        y = (1.0 + 0.03 * rng.standard_normal(3)[groups]) / (1.0 + np.exp(-0.5 - 2.0 * x))
        data = Readings(
            X=x[:, None], y=y + rng.normal(0.0, 0.04, 60), sd=np.zeros(60), scale=(groups,)
        )
        model = model_of(name, data, columns=Columns.plain(1))
        theta = model.layout.theta(np.full((1, len(model.layout)), 0.2))
        evidence = settled(model, theta)
        cells = np.unique(model.cells.cell[groups == 2])
        ahead = predict_ahead(model.rows(theta), evidence.approximation, np.arange(1), cells)
        assert ahead.proper.all()
        rest = model_of(name, data.take(np.flatnonzero(groups != 2)), columns=Columns.plain(1))
        misses.append(ahead.log_density[0] - evidence.log[0] + settled(rest, theta).log[0])
    assert np.abs(misses).mean() < 0.12


@NAMES
def test_silent_readings_tell_nothing(name):
    """The law of a silent group is that of a fit without it."""
    data = readings(43, n=36, inside=(), scale=(3,))
    group = np.flatnonzero(data.scale[0] == 2)
    model = model_of(name, data)
    theta = model.layout.theta(np.zeros((1, len(model.layout))))
    cells = np.unique(model.cells.cell[group])
    quiet = settled(silent(model, cells), theta).approximation
    others = model_of(name, data.take(np.flatnonzero(data.scale[0] != 2)))
    alone = settled(others, theta)
    kept = np.setdiff1d(np.arange(len(model.cells)), cells)
    mean = (model.rows(theta).root @ quiet.mean[:, : -model.cells.scale_groups[0], None])[0, :, 0]
    own = alone.root @ alone.approximation.mean[:, : alone.root.shape[2], None]
    for cell in kept:
        latent = model.cells.latent[cell]
        same = np.abs(others.cells.X - model.cells.X[latent]).max(axis=1) < 1e-9
        assert mean[latent] == pytest.approx(own[0, np.flatnonzero(same)[0], 0], abs=1e-3)


def test_transform_and_shift_of_a_fraction_agree_with_draws():
    """Readings drawn from the law ahead, 200,000 of them: 4 errors of 0.5 / sqrt(200,000)."""
    data = readings(44, n=30, inside=(), scale=(3,), with_sd=False)
    group = np.flatnonzero(data.scale[0] == 1)
    model = model_of("gp", data)
    theta = model.layout.theta(np.zeros((1, len(model.layout))))
    evidence = settled(model, theta)
    cells = np.unique(model.cells.cell[group])
    ahead = predict_ahead(model.rows(theta), evidence.approximation, np.arange(1), cells)
    out = leave_group_out(model, posterior_of(evidence, np.zeros(1)), group, np.inf)
    lik, draws = model.likelihood(theta), 200_000
    rng = np.random.default_rng(9)
    x = rng.multivariate_normal(ahead.mean[0], ahead.covariance[0], draws)
    u, s = x[:, ahead.latent], x[:, -ahead.loads.shape[2] :] @ ahead.loads[0].T
    centre = (1.0 + lik.scale[0, 0] * s) * lik.process_mean(u)
    noise = np.sqrt(lik.noise[0, 0])
    place = np.searchsorted(cells, model.cells.cell[group])
    below = norm.cdf((data.y[group] - centre[:, place]) / noise).mean(0)
    assert out.pit == pytest.approx(below, abs=4.0 * 0.5 / np.sqrt(draws) + 1e-3)
    # The shift by least squares with the moments of the draws, which it approximates.
    means = centre + noise * rng.standard_normal(centre.shape) / np.sqrt(model.cells.count[cells])
    level, inverse = lik.process_mean(u).mean(0), np.linalg.inv(np.cov(means.T))
    strength = level @ inverse @ level
    shift = level @ inverse @ (model.cells.mean[cells] - centre.mean(0)) / strength
    assert out.shift == pytest.approx(shift, abs=0.1 / np.sqrt(strength))
    assert out.shift_pit == pytest.approx(norm.cdf(shift * np.sqrt(strength)), abs=0.03)


def test_reweighted_nodes_agree_with_a_refit():
    data = readings(48, n=60, inside=(), scale=(3,), with_sd=False)
    group = np.flatnonzero(data.scale[0] == 0)
    model = model_of("quadratic", data)
    out = leave_group_out(model, integrate(model, 1), group)
    refit = refit_group_out(model, 1, group)
    assert out.trusted
    assert np.abs(out.pit - refit.pit).mean() < 0.03
    assert out.shift_pit == pytest.approx(refit.shift_pit, abs=0.03)
    assert out.likeness == pytest.approx(refit.likeness, abs=0.03)


def test_a_group_far_off_is_seen_by_the_refit():
    """A third of the readings 40 % low: nodes that made room for it hide part of it."""
    data = readings(46, n=60, inside=(), scale=(3,), with_sd=False)
    group = np.flatnonzero(data.scale[0] == 0)
    y = data.y.copy()
    y[group] *= 0.6
    model = model_of("quadratic", replace(data, y=y))
    tempered, refit = (
        leave_group_out(model, integrate(model, 1), group),
        refit_group_out(model, 1, group),
    )
    assert refit.shift == pytest.approx(-0.4, abs=0.05)
    assert refit.shift_pit < 0.002
    assert refit.shift_pit < tempered.shift_pit < 0.1


def test_censored_readings_have_no_place():
    data = readings(47, n=30, inside=(), scale=(3,), with_sd=False)
    group = np.flatnonzero(data.scale[0] == 1)
    censored = np.zeros(30, dtype=np.intp)
    censored[group[2]] = -1
    model = model_of("quadratic", replace(data, censored=censored))
    out = leave_group_out(model, integrate(model, 1), group)
    assert np.flatnonzero(np.isnan(out.pit)).tolist() == [2]


def test_readings_where_the_others_say_nothing_are_left_aside():
    """A group on one factor, half of it far from all others."""
    x = np.r_[np.linspace(-1.0, 0.0, 20), np.linspace(-1.0, 0.0, 6), np.linspace(2.0, 3.0, 6)]
    y = 1.0 / (1.0 + np.exp(-2.0 * x)) + np.random.default_rng(5).normal(0.0, 0.02, len(x))
    plate = np.repeat([0, 1], [20, 12])
    data = Readings(X=x[:, None], y=y, sd=np.zeros(len(x)), scale=(plate,))
    model = model_of("gp", data, columns=Columns.plain(1))
    posterior = integrate(model, 1)
    out = leave_group_out(model, posterior, np.flatnonzero(plate == 1))
    assert np.isnan(out.pit).tolist() == [False] * 6 + [True] * 6
    none = leave_group_out(model, posterior, np.flatnonzero(plate == 1)[6:])
    assert np.isnan(none.pit).all()
    assert (none.shift, none.shift_pit) == (0.0, 0.5)
