"""The published reactor yields, read as a user's study, against the published fit.

Myers, Montgomery & Anderson-Cook, Response Surface Methodology (2002 edition, Table 7.6): data from
memory, confirmed by recomputing the published fit. Its terms: x1 0.932541, x2 0.577712, x1x2
0.125000, x1^2 -1.308555, x2^2 -0.933442; with the block as a random effect (REML) the intercept is
81.866662 and the residual sd 0.163185.
"""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import muntin

EXAMPLE = Path(__file__).parents[2] / "examples" / "reactor-yield"


@pytest.fixture(scope="module")
def view():
    return muntin.assess(muntin.open_study(EXAMPLE), surrogate="quadratic", seed=1)


@pytest.fixture(scope="module")
def surfaces(view):
    """Fitted and published mean yield over the design's square and a little beyond."""
    times, temperatures = np.meshgrid(np.arange(78, 93, 2.0), np.arange(168, 183, 2.0))
    frame = pd.DataFrame({"time": times.ravel(), "temperature": temperatures.ravel()})
    x1, x2 = (frame["time"] - 85) / 5, (frame["temperature"] - 175) / 5
    published = 81.866662 + 0.932541 * x1 + 0.577712 * x2 + 0.125 * x1 * x2
    published = published - 1.308555 * x1**2 - 0.933442 * x2**2
    return view.at(frame)["yield_percent_mean"], published


def test_shape_of_the_mean_surface_is_the_published_one(surfaces):
    fitted, published = surfaces
    # A third of the smallest standard error of the published terms (0.0577).
    difference = fitted - published
    assert np.abs(difference - difference.mean()).max() < 0.02


def test_level_lies_where_the_random_blocks_put_it(surfaces):
    fitted, published = surfaces
    # Two blocks 4.46 apart leave the level open by about 2; the prior moves it by a few per cent.
    assert abs((fitted - published).mean()) < 0.1


def test_noise_is_the_published_residual(view):
    (fit,) = view.stacks["yield_percent"].fits
    noise = fit.weights @ np.exp(fit.theta[:, fit.names.index("noise_sd")])
    # 0.163185 on 7 df: a 95 % interval of a residual sd is 0.66 to 2.04 times the estimate.
    assert 0.66 * 0.163185 < noise < 2.04 * 0.163185


def test_best_point_is_the_published_stationary_point(view):
    point = view.window().setpoint
    # 86.8615 min and 176.6719 F, on steps of one minute and one degree.
    assert abs(point["time"] - 86.8615) <= 1.0
    assert abs(point["temperature"] - 176.6719) <= 1.0
