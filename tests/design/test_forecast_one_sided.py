"""The forecast of a one-sided target has a closed form, whatever the rounding of the weights."""

import numpy as np
import pytest
from scipy.special import ndtri

from muntin.design.excursion import expected_wrong
from muntin.design.forecast import wrong_share
from muntin.window.probability import Target
from tests.design.surfaces import surface
from tests.design.test_forecast import outlook, today


@pytest.mark.parametrize("kind", ["fraction", "positive", "real"])
@pytest.mark.parametrize("target", [Target(low=0.6), Target(high=0.8)])
def test_one_limit_has_the_closed_form(kind, target):
    posterior = surface(kind)
    ahead, tails = outlook(posterior, [3, 8]), today(posterior, target)
    w = posterior.weights
    total = w @ (ahead.variance + (ahead.mean - w @ ahead.mean) ** 2)
    exact = expected_wrong(ndtri(tails.meets), (w @ ahead.explained) / total).mean()
    assert wrong_share([ahead], [tails]) == pytest.approx(exact, rel=1e-6)


@pytest.mark.parametrize("target", [Target(low=-1e7), Target(high=1e7)])
def test_a_target_that_is_met_everywhere_leaves_nothing_to_call(target):
    posterior = surface("real", nodes=1).take(np.array([0]), np.ones(1))
    assert wrong_share([outlook(posterior)], [today(posterior, target)]) < 1e-12
