"""Expected uncertainty of a target's excursion set after new wells, against tables and refits."""

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import quad
from scipy.special import ndtr

from muntin.design.excursion import (
    bivariate_normal,
    expected_square,
    expected_variance,
    expected_wrong,
)
from muntin.design.outlook import Outlook
from muntin.surrogate.coding import Columns
from muntin.surrogate.nodes import Errors, ProcessNodes, Surface
from muntin.surrogate.priors import LogNormal, Priors
from muntin.surrogate.process import GaussianProcess

DATA = Path(__file__).parent / "data"
RHO = np.linspace(0.0, 0.999, 8)


def table(name):
    return pd.read_csv(DATA / name)


# The formulas, against values computed two independent ways each.


def test_formulas_reach_the_published_values_of_owens_t():
    # Patefield & Tandy 2000 and further values; T is odd in a, and 2 T(h, sqrt((1 - rho) / rho))
    # and 2 T(h, sqrt((1 - rho) / (1 + rho))) reach every a >= 0 and every a <= 1.
    known = table("owens_t.csv")
    h, a, T = known["h"], known["a"].abs(), known["T"].abs()
    np.testing.assert_allclose(expected_wrong(h, 1.0 / (1.0 + a**2)), 2.0 * T, rtol=1e-12)
    low = a <= 1.0
    rho = (1.0 - a[low] ** 2) / (1.0 + a[low] ** 2)
    np.testing.assert_allclose(expected_variance(h[low], rho), 2.0 * T[low], rtol=1e-12)


def test_bivariate_normal_agrees_with_the_table():
    known = table("bvn_cdf.csv")
    ours = bivariate_normal(known["h"], known["k"], known["rho"])
    np.testing.assert_allclose(ours, known["P"], rtol=1e-12)
    swapped = bivariate_normal(known["k"], known["h"], known["rho"])
    np.testing.assert_allclose(swapped, known["P"], rtol=1e-12)


def test_whole_excursion_table():
    # The table is printed to 12 significant digits; the sign of a does not matter.
    known = table("excursion_update.csv")
    assert len(known) == 30
    for sign in (1.0, -1.0):
        c, rho = sign * known["a"], known["rho"]
        np.testing.assert_allclose(expected_variance(c, rho), known["E_p1(1-p1)"], rtol=1e-11)
        some = rho > 0.0
        wrong = known["E_min(p1,1-p1)"][some]
        np.testing.assert_allclose(expected_wrong(c[some], rho[some]), wrong, rtol=1e-11)
        p = ndtr(c)
        np.testing.assert_allclose(p * (1.0 - p), known["p(1-p)_now"], rtol=1e-11)


def after(c, rho, of):
    """E[of(p1)] by adaptive quadrature over what the updated mean may become."""

    def integrand(u):
        p = ndtr((c + np.sqrt(rho) * u) / np.sqrt(1.0 - rho))
        return of(p) * np.exp(-0.5 * u * u) / np.sqrt(2.0 * np.pi)

    kink = -c / np.sqrt(rho)
    points = [kink] if abs(kink) < 12.0 else None
    return quad(integrand, -12.0, 12.0, points=points, epsabs=1e-13, limit=400)[0]


@pytest.mark.parametrize("c", [-2.3, -0.4, 0.0, 1.7])
@pytest.mark.parametrize("rho", [0.05, 0.37, 0.8, 0.97])
def test_formulas_agree_with_quadrature(c, rho):
    assert expected_variance(c, rho) == pytest.approx(after(c, rho, lambda p: p * (1 - p)))
    assert expected_wrong(c, rho) == pytest.approx(after(c, rho, lambda p: min(p, 1 - p)))
    one_sided = expected_square(np.array([-c]), np.array([np.inf]), np.array([rho]))[0]
    assert one_sided == pytest.approx(after(c, rho, lambda p: p * p))
    other_side = expected_square(np.array([-np.inf]), np.array([c]), np.array([rho]))[0]
    assert other_side == pytest.approx(one_sided, rel=1e-12)


@pytest.mark.parametrize(("low", "high"), [(-0.7, 0.2), (0.5, 1.9), (-3.0, 0.0), (0.0, 4.0)])
@pytest.mark.parametrize("rho", [0.1, 0.6, 0.95])
def test_square_between_two_limits_agrees_with_quadrature(low, high, rho):
    def integrand(u):
        left = np.sqrt(1.0 - rho)
        moved = np.sqrt(rho) * u
        p = ndtr((high - moved) / left) - ndtr((low - moved) / left)
        return p * p * np.exp(-0.5 * u * u) / np.sqrt(2.0 * np.pi)

    exact = quad(integrand, -12.0, 12.0, epsabs=1e-13, limit=400)[0]
    ours = expected_square(np.array([low]), np.array([high]), np.array([rho]))[0]
    assert ours == pytest.approx(exact, rel=1e-9)


# Limits.


def test_without_new_knowledge_nothing_changes():
    c = np.array([-4.0, -1.3, 0.0, 0.2, 2.5])
    p = ndtr(c)
    none = np.zeros(5)
    np.testing.assert_allclose(expected_variance(c, none), p * (1.0 - p), rtol=1e-12)


def test_with_all_known_nothing_is_left():
    c = np.array([-4.0, -1.3, 0.0, 0.2, 2.5])
    nearly = np.full(5, 1.0 - 1e-12)
    assert expected_variance(c, nearly).max() < 1e-6
    assert expected_wrong(c, nearly).max() < 1e-6
    low, high = c - 0.3, c + 0.9
    p = ndtr(high) - ndtr(low)
    # A condition known for sure passes or fails: then the mean of p1^2 is the mean of p1.
    np.testing.assert_allclose(expected_square(low, high, nearly), p, atol=2e-6)


@pytest.mark.parametrize("formula", [expected_variance, expected_wrong])
@pytest.mark.parametrize("c", [0.0, 0.6, 3.0])
def test_more_knowledge_never_leaves_more_uncertainty(formula, c):
    left = formula(np.full(len(RHO), c), RHO)
    assert (np.diff(left) < 0.0).all()


@pytest.mark.parametrize("a", [0.0, 0.3, 1.0, 2.6])
def test_half_explained_leaves_todays_variance_as_the_chance_of_a_wrong_call(a):
    # At rho = 1/2, E[min] = p (1 - p) for every a.
    p = ndtr(a)
    assert expected_wrong(a, 0.5) == pytest.approx(p * (1.0 - p), rel=1e-12)


# The batch example on a Gaussian process with fixed hyperparameters, against genuine refits.

REFERENCE = json.loads((DATA / "gp_reference.json").read_text())
X = np.array(REFERENCE["X"])
JUDGED = np.array(REFERENCE["Xstar"])
THRESHOLD = 0.85
PLANS = {
    "now": ([], 0.52712325, None),
    "one well": ([(0.6, 0.6)], 0.50534981, 0.73330761),
    "two wells": ([(0.6, 0.6), (0.85, 0.85)], 0.43319193, 0.62487368),
    "a repeat": ([(0.6, 0.6), (0.6, 0.6), (0.85, 0.85)], 0.43099168, 0.62303817),
}


def surface_of(points, readings):
    """The process refitted from nothing to readings at points, hyperparameters as given."""
    anything = LogNormal(1.0, 1.0)
    priors = Priors(
        mean=REFERENCE["constant_mean"],
        mean_sd=0.0,
        process_sd=anything,
        curvature_sd=anything,
        length_scale=anything,
        noise_sd=anything,
        scale_error=anything,
        inside_error=anything,
    )
    family = GaussianProcess(Columns.plain(2), priors)
    own = np.array([[np.sqrt(REFERENCE["sigma_f2"]), *REFERENCE["lengthscale"]]])
    K = family.covariance(own, points, points)[0] + REFERENCE["sigma_n2"] * np.eye(len(points))
    Q = np.linalg.inv(K)
    errors = Errors(
        np.sqrt([REFERENCE["sigma_n2"]]), np.zeros((1, 0)), np.zeros((1, 0)), np.ones(1)
    )
    alpha = Q @ (np.asarray(readings) - priors.mean)
    nodes = ProcessNodes(family, own, points, alpha[None], Q[None], errors)
    return Surface((nodes,), np.ones(1), "identity")


@pytest.fixture(scope="module")
def now():
    return surface_of(X, REFERENCE["y"])


def outlook(surface, wells):
    candidates = np.array(wells, dtype=float).reshape(-1, 2)
    outlook = Outlook(surface, JUDGED, candidates, (), (), np.arange(len(JUDGED)))
    for number in range(len(candidates)):
        outlook.pick(number)
    return outlook


def test_the_process_is_the_reference_process(now):
    mean, variance = now.moments(JUDGED)
    known = REFERENCE["matern52"]
    np.testing.assert_allclose(mean[0], known["post_mean"], atol=1e-7)
    np.testing.assert_allclose(np.sqrt(variance[0]), known["post_sd_latent"], atol=1e-7)


@pytest.mark.parametrize("plan", PLANS)
def test_batch_example(now, plan):
    wells, variance_left, wrong_left = PLANS[plan]
    ahead = outlook(now, wells)
    c = (ahead.mean - THRESHOLD) / np.sqrt(ahead.variance)
    rho = ahead.explained / ahead.variance
    assert expected_variance(c, rho).sum() == pytest.approx(variance_left, abs=1e-8)
    if wrong_left is not None:
        assert expected_wrong(c, rho).sum() == pytest.approx(wrong_left, abs=1e-8)


@pytest.mark.parametrize("plan", [name for name in PLANS if name != "now"])
def test_explained_variance_agrees_with_a_refit(now, plan):
    wells, *_ = PLANS[plan]
    ahead = outlook(now, wells)
    # The readings to come do not matter to the variance: any will do.
    more = np.concatenate([X, np.array(wells)])
    refit = surface_of(more, [*REFERENCE["y"], *np.linspace(0.2, 0.9, len(wells))])
    _, left = refit.moments(JUDGED)
    np.testing.assert_allclose(ahead.explained, ahead.variance - left, rtol=0, atol=1e-10)
    assert ahead.explained.min() > 0.0


def test_probability_after_the_batch_agrees_with_drawn_refits(now):
    # 4,000 drawn readings, each refitted: the standard error of the sum is about 0.003.
    wells = PLANS["two wells"][0]
    rng = np.random.default_rng(4)
    cov = now.covariance(np.array(wells), np.array(wells))[0]
    mean, _ = now.moments(np.array(wells))
    noisy = cov + REFERENCE["sigma_n2"] * np.eye(len(wells))
    drawn = rng.multivariate_normal(mean[0], noisy, size=4000)
    more = np.concatenate([X, np.array(wells)])
    start = surface_of(more, [*REFERENCE["y"], 0.0, 0.0])
    (nodes,) = start.parts
    _, left = start.moments(JUDGED)
    k = nodes.family.covariance(nodes.own, JUDGED, more)[0]
    readings = np.concatenate([np.tile(REFERENCE["y"], (len(drawn), 1)), drawn], axis=1)
    centre = REFERENCE["constant_mean"]
    means = centre + (readings - centre) @ (k @ nodes.Q[0]).T
    p = ndtr((means - THRESHOLD) / np.sqrt(left))
    total = (p * (1.0 - p)).sum(axis=1)
    error = total.std() / np.sqrt(len(total))
    assert total.mean() == pytest.approx(PLANS["two wells"][1], abs=4.0 * error)
    assert error < 0.005
