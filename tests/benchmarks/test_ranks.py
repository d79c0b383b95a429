import numpy as np
import pymc as pm
import pytest

from muntin.surrogate.cells import collapse
from muntin.surrogate.symbolic import pymc_model
from tests.benchmarks.ranks import below
from tests.benchmarks.simulated import Setup, simulate


def test_the_distribution_function_of_nodes_is_linear_between_them():
    """Nodes at 1, 2, 4 of weights 0.2, 0.5, 0.3, out of order; by hand."""
    nodes, weights = np.array([2.0, 4.0, 1.0]), np.array([0.5, 0.3, 0.2])
    truth = np.array([0.0, 1.0, 1.5, 2.0, 3.0, 9.0])
    values = np.repeat(nodes[:, None], len(truth), axis=1)
    hand = [0.05, 0.1, 0.275, 0.45, 0.65, 0.925]
    assert below(values, weights, truth) == pytest.approx(hand)


def test_data_sets_of_one_design_share_their_wells_and_nothing_else():
    setup = Setup(name="gp", setting=0.02)
    a, b, own = simulate(setup, 3, design=0), simulate(setup, 4, design=0), simulate(setup, 4)
    assert np.array_equal(a.readings.X, b.readings.X)
    assert np.array_equal(a.readings.plate, b.readings.plate)
    assert np.array_equal(a.x, b.x)
    assert not np.isclose(a.readings.y, b.readings.y).any()
    assert not np.isclose(a.theta, b.theta).any()
    assert np.array_equal(b.theta, own.theta)
    assert not np.isclose(b.readings.X, own.readings.X).all(axis=1).any()


def test_censored_readings_lie_at_their_limits():
    data = simulate(Setup(name="quadratic", limits=(0.2, 0.8), wells=40), 5).readings
    free = simulate(Setup(name="quadratic", wells=40), 5).readings
    assert set(data.censored) == {-1, 0, 1}
    assert (data.y[data.censored < 0] == 0.2).all()
    assert (data.y[data.censored > 0] == 0.8).all()
    assert (data.y == np.clip(free.y, 0.2, 0.8)).all()


@pytest.mark.parametrize("kind", ["fraction", "positive"])
def test_exchanged_readings_make_the_model_of_the_other_data_set(kind):
    """What lets NUTS compile once: a log density with data exchanged is that of a new model."""
    setup = Setup(name="quadratic", kind=kind)
    rng = np.random.default_rng(5)
    models = [setup.model(simulate(setup, seed, design=0).readings) for seed in (1, 2)]
    near = [rng.normal(size=len(m.cells.X)) for m in models]
    first = pymc_model(models[0], near=near[0], exchangeable=True)
    other = pymc_model(models[1], near=near[1])
    at = {k: rng.normal(size=np.shape(v)) for k, v in first.initial_point().items()}
    compiled = first.compile_logp(mode="FAST_COMPILE")
    before = compiled(at)
    cells = collapse(simulate(setup, 2, design=0).readings)
    with first:
        pm.set_data({"y": cells.y, "cell_mean": cells.mean, "near": near[1]})
    assert compiled(at) == pytest.approx(other.compile_logp(mode="FAST_COMPILE")(at), rel=1e-9)
    assert compiled(at) != pytest.approx(before, rel=1e-3)
