"""Simulation-based calibration of the whole fast engine: 40 data sets of the Gaussian process here,
200 of both surrogates with `-m slow`.

Truth and readings are drawn from the model; the posterior distribution function at the truth must
then be uniform (Cook, Gelman & Rubin 2006; Talts et al. 2018), which its empirical distribution is
held to with simultaneous 99 % bands (Sailynoja, Burkner & Vehtari 2022).
"""

from functools import cache

import numpy as np
import pytest

from muntin.window.probability import Target
from tests.benchmarks.bands import bands
from tests.benchmarks.ranks import NEW, Places, expected, fitted, placed
from tests.benchmarks.simulated import Setup, simulate

POINTS, ALPHA, TARGET = 20, 0.01, 0.7
FEW, MANY = 40, 200
FAMILIES = pytest.mark.parametrize("name", ["gp", "quadratic"])
SLOW = [pytest.param(name, MANY, marks=pytest.mark.slow) for name in ("gp", "quadratic")]
SETS = pytest.mark.parametrize(("name", "sets"), [("gp", FEW), *SLOW])


@cache
def simulated(name, sets):
    """Places of the truth of so many data sets; chances (sets, 2, 2) of p_mean and p_well beside
    what happened.
    """
    setup = Setup(name=name)
    values, chances = [], []
    for seed in range(sets):
        data = simulate(setup, seed)
        stack = fitted(setup, data)
        values.append(placed(setup, data, stack))
        predicted = expected(setup, data, stack, Target(low=TARGET))
        chances.append(
            [
                (predicted.process_met()[0], data.mean >= TARGET),
                (predicted.met()[0], data.reading >= TARGET),
            ]
        )
    return Places((*stack.fits[0].names, *NEW), np.array(values)), np.array(chances, dtype=float)


def uniform(u):
    return bands(len(u), POINTS, ALPHA).hold(u)


@SETS
@pytest.mark.parametrize("quantity", NEW)
def test_what_a_new_condition_does_lies_anywhere_in_its_posterior_alike(name, sets, quantity):
    assert uniform(simulated(name, sets)[0].of(quantity))


@pytest.mark.parametrize("name", ["gp", pytest.param("quadratic", marks=pytest.mark.slow)])
def test_hyperparameters_lie_anywhere_in_their_posterior_alike(name):
    places, _ = simulated(name, FEW)
    assert [n for n in places.names if not uniform(places.of(n))] == []


@pytest.mark.slow
@FAMILIES
def test_hyperparameters_lie_anywhere_in_their_posterior_alike_in_many_sets(name):
    places, _ = simulated(name, MANY)
    assert [n for n in places.names if not uniform(places.of(n))] == []


@SETS
@pytest.mark.parametrize("which", [0, 1], ids=["p_mean", "p_well"])
def test_what_is_said_to_happen_happens_as_often(name, sets, which):
    """Successes less the sum of their chances, in its own sd, and Brier's score the same way."""
    p, hit = simulated(name, sets)[1][:, which].T
    spread = np.sqrt((p * (1.0 - p)).sum())
    assert abs((hit - p).sum()) < 2.58 * spread
    score = (hit - p) ** 2
    expected = p * (1.0 - p)
    brier_sd = np.sqrt((expected * (1.0 - 2.0 * p) ** 2).sum())
    assert abs((score - expected).sum()) < 2.58 * brier_sd
