"""Published prediction and tolerance factors, where a study is no more than a normal sample.

One condition read n times, without shared errors, under flat priors of the level and of ln sigma:
the level is Student's t, sigma scaled inverse chi, and what the posterior says of wells to come
agrees with the sampling limits (Hahn & Meeker 1991, chapter 4; Geisser 1993, section 2.2.2).
"""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.special import ndtr, ndtri

from muntin.window.probability import Target, mean_meets, well_meets
from tests.external.flat import flat_model, over_noise

DATA = Path(__file__).parent / "data"
HERE = np.zeros((1, 1))


def sample(n):
    """The surface of n readings of one condition, their mean and standard deviation."""
    y = 70.0 + 4.0 * np.random.default_rng(n).standard_normal(n)
    sd = y.std(ddof=1)
    model = flat_model(np.zeros((n, 1)), y, 1e6 * sd, ((),))
    return over_noise(model, sd, n - 1), y.mean(), sd


def chance_one_sided(surface, point, share, limit):
    """Posterior probability that at least `share` of the wells to come lie above the limit.

    At a node the mean is Gaussian and sigma known, and the share is P(N(mean, sigma^2) > limit).
    """
    mean, variance = (m[:, 0] for m in surface.moments(point))
    away = mean - limit - ndtri(share) * surface.errors.noise
    return surface.weights @ ndtr(away / np.sqrt(variance))


def chance_between(surface, point, share, middle, reach):
    """The same of middle - reach to middle + reach: the share falls with the mean's distance."""
    mean, variance = (m[:, 0] for m in surface.moments(point))
    sigma = surface.errors.noise
    near, far = np.zeros_like(sigma), np.full_like(sigma, 2.0 * reach) + 10.0 * sigma
    for _ in range(80):
        at = 0.5 * (near + far)
        inside = ndtr((reach - at) / sigma) - ndtr((-reach - at) / sigma)
        near, far = np.where(inside >= share, at, near), np.where(inside >= share, far, at)
    possible = 2.0 * ndtr(reach / sigma) - 1.0 >= share
    sd, away = np.sqrt(variance), mean - middle
    within = ndtr((near - away) / sd) - ndtr((-near - away) / sd)
    return surface.weights @ np.where(possible, within, 0.0)


# --- One condition -------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("n", "one_sided", "two_sided"),
    [(5, 2.335321, 3.041443), (10, 1.922585, 2.372570), (20, 1.771834, 2.144711)],
)
def test_a_well_to_come_is_met_as_often_as_the_prediction_factors_say(n, one_sided, two_sided):
    """95 % factors t sqrt(1 + 1/n), tabulated to six decimals."""
    surface, mean, sd = sample(n)
    moments = surface.moments(HERE)
    above = well_meets(surface, moments, Target(low=mean - one_sided * sd))
    assert above[0] == pytest.approx(0.95, abs=1e-6)
    below = well_meets(surface, moments, Target(high=mean + one_sided * sd))
    assert below[0] == pytest.approx(0.95, abs=1e-6)
    between = Target(mean - two_sided * sd, mean + two_sided * sd)
    assert well_meets(surface, moments, between)[0] == pytest.approx(0.95, abs=1e-6)


def factors():
    table = pd.read_csv(DATA / "tolerance_k.csv")
    return table[table["n"].isin([3, 5, 6, 10, 20, 43, 100])]


def test_tolerance_factors():
    """Odeh & Owen (1980) and ISO 16269-6, as tabulated: exact factors k to four decimals,
    which leaves 5e-5 of a chance where a hundred readings know it best.

    mean - k sd is met by a share p or more of the wells with probability gamma, and mean -+ k sd
    likewise; Howe's two-sided approximation (1969) is not what comes out for three readings.
    """
    for n, rows in factors().groupby("n"):
        surface, mean, sd = sample(int(n))
        for row in rows.itertuples():
            lower = mean - row.k_one_sided_exact * sd
            found = chance_one_sided(surface, HERE, row.p, lower)
            assert found == pytest.approx(row.gamma, abs=5e-5)
            reach = row.k_two_sided_exact * sd
            found = chance_between(surface, HERE, row.p, mean, reach)
            assert found == pytest.approx(row.gamma, abs=5e-5)
            if n == 3:
                howe = chance_between(surface, HERE, row.p, mean, row.k_two_sided_howe * sd)
                assert howe - row.gamma > 1e-4


@pytest.mark.parametrize(("n", "factor"), [(43, 1.873954), (6, 4.411081)])
def test_tolerance_factors_of_the_worked_example(n, factor):
    """NIST/SEMATECH e-Handbook 7.2.6.3, share 0.90 with probability 0.99; for n = 6 its normal
    approximation, 5.2808, is far from the exact 4.4111.
    """
    surface, mean, sd = sample(n)
    found = chance_one_sided(surface, HERE, 0.90, mean - factor * sd)
    assert found == pytest.approx(0.99, abs=1e-6)


# --- A regression --------------------------------------------------------------------------------

# Montgomery, Design and Analysis of Experiments, example 11.2: data and fit from memory, the fit
# reproduced; limits recomputed. x1, x2: leverage; 90 % prediction limits; P(mean >= 79.5) and
# P(new run >= 79.5); the limit that 90 % of runs exceed with probability 0.95.
TERMS = ((), (0,), (1,), (0, 1), (0, 0), (1, 1))
SD = np.sqrt(0.496373 / 7.0)
POINTS = {
    (0.0, 0.0): (0.20000, 79.3873, 80.4926, 0.996144, 0.912382, 79.2169),
    (0.389, 0.306): (0.19025, 79.6620, 80.7628, 0.999762, 0.978015, 79.4937),
    (1.0, 1.0): (0.62508, 78.6793, 79.9656, 0.213424, 0.308520, 78.4499),
    (-1.0, -1.0): (0.62508, 75.6588, 76.9451, 1e-06, 1.6e-05, 75.4294),
    (1.0, 0.0): (0.26880, 78.9903, 80.1268, 0.657899, 0.574615, 78.8065),
}


@pytest.fixture(scope="module")
def rotatable():
    data = pd.read_csv(DATA / "montgomery_ccd.csv")
    model = flat_model(data[["x1", "x2"]], data["y"], 1e4, TERMS)
    return over_noise(model, SD, 7)


@pytest.mark.parametrize("point", POINTS)
def test_limits_of_a_regression(rotatable, point):
    """Limits are printed to four decimals, where the density of the chances is at most 1.5."""
    leverage, lower, upper, p_mean, p_new, tolerance = POINTS[point]
    X = np.array([point])
    moments = rotatable.moments(X)
    assert moments[1][:, 0] / rotatable.errors.noise**2 == pytest.approx(leverage, abs=6e-6)
    assert mean_meets(rotatable, moments, Target(low=79.5))[0] == pytest.approx(p_mean, abs=2e-6)
    assert well_meets(rotatable, moments, Target(low=79.5))[0] == pytest.approx(p_new, abs=2e-6)
    between = well_meets(rotatable, moments, Target(low=lower, high=upper))
    assert between[0] == pytest.approx(0.90, abs=7.5e-5)
    assert well_meets(rotatable, moments, Target(low=lower))[0] == pytest.approx(0.95, abs=7.5e-5)
    found = chance_one_sided(rotatable, X, 0.90, tolerance)
    assert found == pytest.approx(0.95, abs=7.5e-5)
