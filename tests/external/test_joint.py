"""Several attributes met together, against arithmetic and tables of the bivariate normal."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.special import ndtri

from muntin.surrogate.nodes import Errors, Surface
from muntin.window.joint import joint_meets
from muntin.window.predicted import Predicted
from muntin.window.probability import Target

DATA = Path(__file__).parent / "data"


@dataclass(frozen=True)
class OneNode:
    """A surface known to the last digit; a reading has noise of sd 1."""

    errors: Errors


def reading(mean, target):
    mean = np.atleast_1d(np.asarray(mean, dtype=float))[None]
    errors = Errors(np.ones(1), np.zeros((1, 0)), np.zeros((1, 0)), np.ones(1))
    known = Surface((OneNode(errors),), np.ones(1), "identity")
    return Predicted(known, (mean, np.zeros_like(mean)), target)


def joint(responses, correlation):
    return joint_meets(responses, np.stack([r.met() for r in responses]), np.asarray(correlation))


@pytest.mark.parametrize(("each", "together"), [(0.5, 0.125), (0.95, 0.857)])
def test_three_independent_attributes(each, together):
    # Three attributes at their limits pass together once in eight; at 0.95 each, 0.95^3 = 0.857.
    three = [reading(ndtri(each), Target(low=0.0))] * 3
    assert joint(three, np.eye(3))[0] == pytest.approx(each**3, rel=1e-12)
    assert joint(three, np.eye(3))[0] == pytest.approx(together, abs=5e-4)


def test_two_readings_agree_with_the_bivariate_table():
    known = pd.read_csv(DATA / "bvn_cdf.csv")
    assert len(known) == 10
    for h, k, rho, p in known.itertuples(index=False):
        R = [[1.0, rho], [rho, 1.0]]
        below = [reading(0.0, Target(high=float(v))) for v in (h, k)]
        assert joint(below, R)[0] == pytest.approx(p, rel=1e-8)
        above = [reading(v, Target(low=0.0)) for v in (h, k)]
        assert joint(above, R)[0] == pytest.approx(p, rel=1e-8)
        # A third that is never in doubt changes nothing.
        sure = reading(50.0, Target(low=0.0))
        wide = np.eye(3)
        wide[:2, :2] = R
        assert joint([*above, sure], wide)[0] == pytest.approx(p, abs=1e-3)


def test_three_readings_at_their_limits_have_a_closed_form():
    # Orthant probability 1/8 + (asin r12 + asin r13 + asin r23) / (4 pi).
    R = np.array([[1.0, 0.5, 0.3], [0.5, 1.0, -0.2], [0.3, -0.2, 1.0]])
    exact = 0.125 + np.arcsin([0.5, 0.3, -0.2]).sum() / (4.0 * np.pi)
    ours = joint([reading(0.0, Target(low=0.0))] * 3, R)[0]
    assert ours == pytest.approx(exact, abs=5e-4)
