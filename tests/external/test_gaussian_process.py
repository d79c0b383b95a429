"""The Gaussian process at fixed hyperparameters against scikit-learn and matrix formulas.

`gp_reference.json` holds ten readings on the unit square (two conditions twice), Matern-5/2 with
process variance 0.04, lengths 0.5 and 0.8, noise variance 0.0004, constant mean 0.75, computed with
scikit-learn, by matrix formulas and by explicit refits, which agree to 1e-7.
"""

import json
from pathlib import Path

import numpy as np
import pytest
from sklearn.gaussian_process import GaussianProcessRegressor
from sklearn.gaussian_process.kernels import ConstantKernel, Matern, WhiteKernel

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Columns
from muntin.surrogate.evidence import Model, evaluate, slope
from muntin.surrogate.loo import leave_one_out
from muntin.surrogate.nodes import Errors, ProcessNodes, Surface
from muntin.surrogate.process import GaussianProcess
from muntin.window.probability import Target, mean_meets, well_meets
from tests.external.flat import flat_priors

REFERENCE = json.loads((Path(__file__).parent / "data" / "gp_reference.json").read_text())
KNOWN = REFERENCE["matern52"]
NEW = np.array(REFERENCE["Xstar"])


def process(X, y, level, level_sd, theta):
    """Model, evidence and surface at given ln (noise, process sd, lengths)."""
    family = GaussianProcess(Columns.plain(X.shape[1]), flat_priors(level, level_sd))
    model = Model(family, collapse(Readings(X=X, y=y, sd=np.zeros(len(y)))), "identity")
    evidence = evaluate(model, theta)
    a, layout = evidence.approximation, model.layout
    weights = family.weights(evidence.root, a.mean, a.V)
    errors = Errors(
        layout.noise(theta),
        layout.inside_sd(theta),
        layout.scale_sd(theta),
        layout.ceiling_of(theta),
    )
    nodes = ProcessNodes(family, layout.family(theta), model.cells.X, *weights, errors)
    return model, evidence, Surface((nodes,), np.ones(1), "identity")


def reference(level_sd=0.0):
    r = REFERENCE
    theta = 0.5 * np.log([[r["sigma_n2"], r["sigma_f2"], *np.square(r["lengthscale"])]])
    X, y = np.array(r["X"]), np.array(r["y"])
    return process(X, y, r["constant_mean"], level_sd, theta)


def test_moments_and_covariance():
    _, _, surface = reference()
    mean, variance = surface.moments(NEW)
    assert mean[0] == pytest.approx(KNOWN["post_mean"], abs=1e-7)
    assert np.sqrt(variance[0]) == pytest.approx(KNOWN["post_sd_latent"], abs=1e-7)
    assert surface.covariance(NEW, NEW)[0] == pytest.approx(
        np.array(KNOWN["post_cov_latent"]), abs=1e-7
    )
    noise = surface.errors.noise[0]
    assert np.sqrt(variance[0] + noise**2) == pytest.approx(KNOWN["post_sd_obs"], abs=1e-7)


def test_log_marginal_likelihood_and_its_gradient():
    """The reference's gradient is in ln variances; ours in ln sds is twice that for those."""
    model, evidence, _ = reference()
    assert evidence.log[0] == pytest.approx(KNOWN["lml"], abs=1e-7)
    variance, first, second, noise = KNOWN["dlml_dlog_sf2_l1_l2_sn2"]
    expected = [2.0 * noise, 2.0 * variance, first, second]
    assert slope(model, evidence)[0] == pytest.approx(expected, abs=1e-6)


def test_leave_one_out():
    """Rasmussen & Williams 2006, eqs 5.10 to 5.12, though two conditions are collapsed to cells."""
    model, evidence, _ = reference()
    prior = evidence.prior_variance(model.cells)
    loo = leave_one_out(
        model.cells, model.likelihood(evidence.theta), evidence.approximation, np.zeros(1), prior
    )
    assert loo.mean == pytest.approx(KNOWN["loo_mean"], abs=1e-7)
    assert loo.sd**2 == pytest.approx(KNOWN["loo_var"], abs=1e-7)
    assert loo.log_density == pytest.approx(KNOWN["loo_logpred"], abs=1e-6)
    assert loo.log_density.sum() == pytest.approx(KNOWN["loo_total"], abs=1e-6)


def test_probabilities():
    _, _, surface = reference()
    moments, target = surface.moments(NEW), Target(low=0.85)
    latent, new = KNOWN["prob_latent_ge_0p85"], KNOWN["prob_newobs_ge_0p85"]
    assert mean_meets(surface, moments, target) == pytest.approx(latent, abs=1e-6)
    assert well_meets(surface, moments, target) == pytest.approx(new, abs=1e-6)


def test_a_flat_level_is_ordinary_kriging():
    """A constant of sd 10 is one estimated by generalised least squares, but for a pull towards
    its prior of (0.1 / 10)^2: the readings know it to about 0.1.
    """
    _, _, surface = reference(level_sd=10.0)
    mean, variance = surface.moments(NEW)
    assert mean[0] == pytest.approx(KNOWN["ok_mean"], abs=5e-5)
    assert np.sqrt(variance[0]) == pytest.approx(KNOWN["ok_sd_latent"], abs=5e-5)


@pytest.mark.parametrize(("n", "depth", "new"), [(17, 3, 5), (31, 2, 7), (12, 1, 4)])
def test_scikit_learn_run_here(n, depth, new):
    """GaussianProcessRegressor with the same kernel on readings with repeats, no fitting."""
    rng = np.random.default_rng(depth)
    X = rng.uniform(-1.0, 1.0, (n, depth))
    X[-4:] = X[:4]
    y = np.sin(2.0 * X).sum(1) + rng.normal(0.0, 0.1, n)
    points = rng.uniform(-1.2, 1.2, (new, depth))
    process_sd, noise = 0.9, 0.15
    lengths = rng.uniform(0.5, 2.0, depth)
    kernel = ConstantKernel(process_sd**2) * Matern(lengths, nu=2.5) + WhiteKernel(noise**2)
    theirs = GaussianProcessRegressor(kernel, alpha=0.0, optimizer=None).fit(X, y)
    log_marginal, gradient = theirs.log_marginal_likelihood(
        theirs.kernel_.theta, eval_gradient=True
    )
    theta = np.log([[noise, process_sd, *lengths]])
    model, evidence, surface = process(X, y, 0.0, 0.0, theta)
    assert len(model.cells) == n - 4
    assert evidence.log[0] == pytest.approx(log_marginal, abs=1e-7)
    expected = [2.0 * gradient[-1], 2.0 * gradient[0], *gradient[1:-1]]
    assert slope(model, evidence)[0] == pytest.approx(expected, abs=1e-5)
    mean, covariance = theirs.predict(points, return_cov=True)
    assert surface.moments(points)[0][0] == pytest.approx(mean, abs=1e-7)
    own = covariance - noise**2 * np.eye(new)
    assert surface.covariance(points, points)[0] == pytest.approx(own, abs=1e-7)
