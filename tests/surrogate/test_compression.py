"""Few nodes answer as the many do."""

import numpy as np
import pytest

from muntin.surrogate.assembly import nodes_of
from muntin.surrogate.cells import collapse
from muntin.surrogate.compression import compressed
from muntin.surrogate.evidence import Model
from muntin.surrogate.fit import family_of
from muntin.surrogate.hyperparameters import integrate
from muntin.surrogate.nodes import Surface
from muntin.window.probability import Target, mean_meets, process_mean, well_meets
from tests.benchmarks.trials import both_errors, choices, few_wells, near_ceiling, real, scale_error


def many(trial, name):
    """The model and its surface on every node of the posterior."""
    link = "identity" if trial.kind == "real" else "logit"
    model = Model(family_of(name, trial.columns, trial.priors), collapse(trial.readings), link)
    posterior = integrate(model, 1, nodes=256)
    evidence, approx = posterior.evidence, posterior.evidence.approximation
    own = evidence.root.shape[2]
    mean, V = approx.mean[:, :own], approx.V[:, :own, :own]
    nodes = nodes_of(model, evidence.theta, evidence.root, mean, V)
    return model, Surface((nodes,), np.exp(posterior.log_weights), link)


@pytest.mark.parametrize(
    ("make", "name"),
    [
        (scale_error, "gp"),
        (scale_error, "quadratic"),
        (both_errors, "gp"),
        (few_wells, "quadratic"),
        (choices, "gp"),
        (real, "gp"),
    ],
)
def test_probabilities_and_means_are_kept(make, name):
    """At conditions and targets that were not asked for when the nodes were chosen."""
    trial = make()
    model, full = many(trial, name)
    few = compressed(full, trial.columns, model.cells)
    assert len(few.weights) < 90 < len(full.weights)
    assert few.weights.sum() == pytest.approx(1.0)
    assert (few.weights > 0.0).all()
    scale = 1.0 if trial.kind == "fraction" else 3.0
    at_few, at_full = few.moments(trial.grid), full.moments(trial.grid)
    for target in (trial.target, 0.6 * trial.target, 0.3 * trial.target):
        for meets in (mean_meets, well_meets):
            p = meets(few, at_few, Target(low=target)), meets(full, at_full, Target(low=target))
            apart = np.abs(p[0] - p[1])
            assert apart.max() < 0.02
            assert apart.mean() < 0.002
    means = process_mean(few, at_few) - process_mean(full, at_full)
    assert np.abs(means).max() < 0.005 * scale


@pytest.mark.parametrize(("make", "name"), [(near_ceiling, "gp"), (few_wells, "quadratic")])
def test_probabilities_among_the_ceilings_are_kept(make, name):
    """Targets that the process reaches only where it levels off high enough."""
    trial = make()
    model, full = many(trial, name)
    few = compressed(full, trial.columns, model.cells)
    at_few, at_full = few.moments(trial.grid), full.moments(trial.grid)
    for low in (0.9, 0.95, 0.97, 0.98, 0.99):
        p, q = mean_meets(few, at_few, Target(low=low)), mean_meets(full, at_full, Target(low=low))
        assert np.abs(p - q).max() < 0.03


def test_equal_weights_on_as_many_nodes_do_worse():
    """What the weights are worth: systematic resampling to as many nodes."""
    trial = scale_error()
    model, full = many(trial, "gp")
    few = compressed(full, trial.columns, model.cells)
    drawn = full.lightened(len(few.weights))
    target = Target(low=trial.target)
    p, q, r = (mean_meets(s, s.moments(trial.grid), target) for s in (full, few, drawn))
    assert np.abs(p - q).max() < 0.5 * np.abs(p - r).max()


def test_few_nodes_stay_as_they_are():
    trial = few_wells()
    model, full = many(trial, "gp")
    few = full.take(np.arange(30), np.full(30, 1.0 / 30.0))
    assert compressed(few, trial.columns, model.cells) is few
