"""One response at conditions: the nodes where they are sure, the cloud elsewhere."""

from dataclasses import replace

import numpy as np
import pytest

from muntin.surrogate.coding import Columns
from muntin.surrogate.nodes import Errors, PolynomialNodes, Surface
from muntin.surrogate.polynomial import Quadratic
from muntin.surrogate.priors import priors_of
from muntin.window.predicted import Predicted
from muntin.window.probability import Target, mean_meets, well_meets

FAMILY = Quadratic(Columns.plain(1), priors_of("fraction", (0.0, 1.0)))
X = np.linspace(-1.0, 1.0, 9)[:, None]
TARGET = Target(low=0.8)
STILL = np.zeros_like(X)


def surface(shift=0.0, slope=6.0, sd=0.5, copies=1):
    """Nodes, all alike, of a straight line in the latent value."""
    mean = np.tile([shift, slope, 0.0], (copies, 1))
    V = np.broadcast_to(np.diag([sd**2, 0.1 * sd**2, 0.0]), (copies, 3, 3))
    one = np.ones((copies, 1))
    errors = Errors(0.02 * one[:, 0], 0.1 * one, 0.03 * one, 0.97 * one[:, 0])
    return Surface((PolynomialNodes(FAMILY, mean, V, errors),), one[:, 0] / copies, "logit")


def test_the_cloud_speaks_where_the_nodes_are_not_sure():
    cloud = surface(shift=0.7)
    plain, other = surface(), Predicted.of(cloud, X, TARGET, STILL)
    found = Predicted.of(replace(plain, cloud=cloud), X, TARGET, STILL)
    alone = Predicted.of(plain, X, TARGET, STILL)
    for ours, nodes, draws in (
        (found.process_met(), alone.process_met(), other.process_met()),
        (found.met(), alone.met(), other.met()),
    ):
        unsure = (nodes > 5e-4) & (nodes < 1.0 - 5e-4)
        assert 2 <= unsure.sum() <= 7
        np.testing.assert_allclose(ours[unsure], draws[unsure], rtol=1e-9)
        np.testing.assert_array_equal(ours[~unsure], nodes[~unsure])
        assert np.abs(ours - nodes).max() > 0.05


def test_without_a_cloud_the_nodes_speak():
    plain = surface()
    found, law = Predicted.of(plain, X, TARGET, STILL), plain.latent(X)
    np.testing.assert_array_equal(found.process_met(), mean_meets(plain, law, TARGET))
    np.testing.assert_array_equal(found.met(), well_meets(plain, law, TARGET))


@pytest.mark.parametrize("setting", [0.0, 0.05])
def test_some_of_the_conditions_and_other_targets(setting):
    both = replace(surface(), cloud=surface(shift=0.3, copies=40))
    found, rows = Predicted.of(both, X, TARGET, STILL + setting), np.array([4, 5, 7])
    lower = Target(low=0.6, high=0.9)
    for whole, part in (
        (found.met(), found.at(rows).met()),
        (found.process_met(lower), found.at(rows).process_met(lower)),
        (found.met(lower), found.at(rows).met(lower)),
    ):
        np.testing.assert_allclose(whole[rows], part, rtol=1e-9)


def test_setting_errors_reach_the_cloud():
    both = replace(surface(), cloud=surface(copies=40))
    still, moved = (Predicted.of(both, X, TARGET, STILL + sd).met() for sd in (0.0, 0.1))
    alone = Predicted.of(surface(), X, TARGET, STILL + 0.1).met()
    assert np.abs(still - moved).max() > 0.01
    np.testing.assert_allclose(moved, alone, atol=1e-6)


@pytest.mark.parametrize("target", [TARGET, Target(low=0.3, high=0.9)])
@pytest.mark.parametrize("sd", [0.02, 0.5, 1.5])
def test_one_point_for_each_of_a_crowd_sums_as_many_for_each(target, sd):
    one, crowd = surface(sd=sd), surface(sd=sd, copies=4096)
    p, q = (well_meets(s, s.moments(X), target) for s in (one, crowd))
    np.testing.assert_allclose(q, p, atol=1e-3)
