"""Expected improvement against the table, quadrature and the Branin function."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import quad
from scipy.special import expit

from muntin.design.best import BestCriterion
from muntin.design.improvement import log_expected_improvement, log_improvement_of_mean
from muntin.design.outlook import Outlook
from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns, Continuous
from muntin.surrogate.fit import fit_surrogate
from muntin.surrogate.links import mean_of
from muntin.surrogate.priors import priors_of
from muntin.window.probability import Target

DATA = Path(__file__).parent / "data"


def test_whole_table():
    known = pd.read_csv(DATA / "expected_improvement.csv")
    ours = np.exp(log_expected_improvement(known["mean"], known["sd"], known["best"]))
    np.testing.assert_allclose(ours, known["EI"], rtol=1e-9)


def test_without_spread_only_the_gain_counts():
    values = log_expected_improvement([0.9, 0.8, 0.85], 0.0, 0.85)
    np.testing.assert_allclose(np.exp(values), [0.05, 0.0, 0.0], rtol=1e-9)


def test_little_spread_tends_to_the_gain():
    value = log_expected_improvement(0.9, 1e-6, 0.85)
    assert np.exp(value) == pytest.approx(0.05, rel=1e-12)


def test_far_below_the_best_it_is_finite_and_still_ranks():
    z = -np.concatenate([np.linspace(0.0, 60.0, 601), np.geomspace(61.0, 1e12, 1000)])
    values = log_expected_improvement(z, 1.0, 0.0)
    assert np.isfinite(values).all()
    assert (np.diff(values) < 0.0).all()


@pytest.mark.parametrize("z", [-40.0, -300.0, -1e4, -1e5])
def test_far_tail_agrees_with_its_series(z):
    # z Phi(z) + phi(z) = phi(z) (1/z^2 - 3/z^4 + 15/z^6 - ...): Mills' ratio, integrated once.
    series = 1.0 / z**2 - 3.0 / z**4 + 15.0 / z**6 - 105.0 / z**8
    expected = -0.5 * z**2 - 0.5 * np.log(2.0 * np.pi) + np.log(series)
    assert log_expected_improvement(z, 1.0, 0.0) == pytest.approx(expected, rel=1e-9)


def test_joins_of_the_three_forms_are_smooth():
    # The slope of ln EI is Phi / (z Phi + phi), continuous; a step at a join would break it.
    for join in (-1.0, -1e4):
        h = 1e-6 * abs(join)
        below, above = log_expected_improvement([join - h, join + h], 1.0, 0.0)
        slope = (above - below) / (2.0 * h)
        further = log_expected_improvement([join - 3.0 * h, join + 3.0 * h], 1.0, 0.0)
        assert slope == pytest.approx((further[1] - further[0]) / (6.0 * h), rel=1e-6)


# The improvement of the process mean g(f), on the raw scale.

GAUSSIANS = [(0.3, 0.7, 0.4), (-2.0, 0.4, 1.2), (3.0, 0.05, 2.0), (1.0, 2.5, 4.0), (4.0, 1.5, 4.2)]


def improvement(link, mean, sd, best, rising):
    """E[(g(f) - g(best))+], or of the fall, by adaptive quadrature."""
    mark, sign = mean_of(link, best), 1.0 if rising else -1.0

    def integrand(z):
        gain = sign * (mean_of(link, mean + sd * z) - mark)
        return max(float(gain), 0.0) * np.exp(-0.5 * z * z) / np.sqrt(2.0 * np.pi)

    kink = (best - mean) / sd
    ends = (kink, max(kink, 0.0) + 40.0) if rising else (min(kink, 0.0) - 40.0, kink)
    # The peak lies at the kink or, for the log link, at z = sd.
    inner = [p for p in (0.0, sd, -6.0, 6.0, kink + 3.0, kink - 3.0) if ends[0] < p < ends[1]]
    return quad(integrand, *ends, points=inner, epsabs=0.0, epsrel=1e-11, limit=800)[0]


@pytest.mark.parametrize("rising", [True, False])
@pytest.mark.parametrize("link", ["logit", "log"])
@pytest.mark.parametrize(("mean", "sd", "best"), GAUSSIANS)
def test_improvement_of_the_mean_agrees_with_quadrature(link, mean, sd, best, rising):
    arguments = [np.array([v]) for v in (mean, sd, best)]
    ours = log_improvement_of_mean(link, *arguments, rising)[0]
    assert np.exp(ours) == pytest.approx(improvement(link, mean, sd, best, rising), rel=1e-6)


def test_improvement_of_a_fraction_agrees_with_monte_carlo():
    rng = np.random.default_rng(8)
    gain = np.maximum(expit(rng.normal(1.1, 0.8, 400_000)) - expit(1.5), 0.0)
    ours = np.exp(log_improvement_of_mean("logit", *map(np.atleast_1d, (1.1, 0.8, 1.5))))[0]
    assert ours == pytest.approx(gain.mean(), abs=4.0 * gain.std() / np.sqrt(len(gain)))


@pytest.mark.parametrize("rising", [True, False])
@pytest.mark.parametrize("link", ["logit", "log"])
def test_where_the_link_is_a_line_the_identity_is_met(link, rising):
    # Over 1e-3 of a latent unit g is a line of slope g'; both ends of ln EI shrink by it.
    mean, sd, best = np.array([0.4002]), np.array([4e-4]), np.array([0.4])
    slope = float(expit(0.4) * expit(-0.4)) if link == "logit" else float(np.exp(0.4))
    ours = log_improvement_of_mean(link, mean, sd, best, rising)
    plain = log_improvement_of_mean("identity", mean, sd, best, rising)
    np.testing.assert_allclose(ours, plain + np.log(slope), atol=1e-3)


def test_improvement_of_the_identity_is_the_plain_one():
    mean, sd, best = (
        np.array([0.2, 0.7, -3.0]),
        np.array([0.5, 0.1, 2.0]),
        np.array([0.3, 0.1, 1.0]),
    )
    risen = log_improvement_of_mean("identity", mean, sd, best)
    np.testing.assert_allclose(risen, log_expected_improvement(mean, sd, best), rtol=1e-12)
    fallen = log_improvement_of_mean("identity", mean, sd, best, rising=False)
    np.testing.assert_allclose(fallen, log_expected_improvement(-mean, sd, -best), rtol=1e-12)


@pytest.mark.parametrize("link", ["logit", "log"])
def test_improvement_of_the_mean_still_ranks_where_it_underflows(link):
    mean = np.linspace(-200.0, 0.0, 81)
    values = log_improvement_of_mean(link, mean, np.full(81, 0.5), np.full(81, 3.0))
    assert np.isfinite(values).all()
    assert (np.diff(values) > 0.0).all()
    assert np.exp(values[0]) == 0.0


# The Branin function, searched well by well (Jones, Schonlau & Welch 1998).

LEAST = 10.0 / (8.0 * np.pi)
AXES = (Continuous(low=-5.0, high=10.0), Continuous(low=0.0, high=15.0))


def branin(x1, x2):
    b, c, t = 5.1 / (4.0 * np.pi**2), 5.0 / np.pi, 1.0 / (8.0 * np.pi)
    return (x2 - b * x1**2 + c * x1 - 6.0) ** 2 + 10.0 * (1.0 - t) * np.cos(x1) + 10.0


def test_branin_is_the_published_function():
    known = {
        (0.0, 0.0): 55.60211264227026,
        (5.0, 5.0): 26.62274255546139,
        (-5.0, 0.0): 308.1290960116067,
        (10.0, 15.0): 145.8721908793955,
        (2.5, 7.5): 24.12996441362226,
        (-np.pi, 12.275): LEAST,
        (np.pi, 2.275): LEAST,
        (3.0 * np.pi, 2.475): LEAST,
    }
    for place, value in known.items():
        assert branin(*place) == pytest.approx(value, rel=1e-12)


def coded(points):
    return np.concatenate([axis.code(x) for axis, x in zip(AXES, points.T, strict=True)], axis=1)


# Half-unit bench steps; the least value on them is 0.427, and 1 % of them lie below 1.
GRID = np.stack(np.meshgrid(np.linspace(-5, 10, 31), np.linspace(0, 15, 31)), -1).reshape(-1, 2)


def search(start, steps, sign):
    """Values read at the wells of start (n, 2) and at `steps` more, one at a time.

    sign -1 seeks the least value; +1 the greatest of the function upside down.
    """
    target = Target(high=1.0) if sign < 0 else Target(low=-1.0)
    run, none = start, np.zeros(0, dtype=np.intp)
    for _ in range(steps):
        y = -sign * branin(*run.T)
        readings = Readings(X=coded(run), y=y, sd=np.zeros(len(run)))
        priors = priors_of("real", (float(y.min()), float(y.max())))
        surface = fit_surrogate("gp", readings, "real", Columns.plain(2), priors, 1).surface
        ahead = Outlook(surface.lightened(16), coded(GRID), coded(GRID), (), (), none)
        values = BestCriterion((ahead,), (target,), coded(run)).values([])
        run = np.concatenate([run, GRID[[np.argmax(values)]]])
    return branin(*run.T)


@pytest.mark.parametrize(("seed", "sign"), [(5, -1.0), (6, 1.0)])
def test_search_of_branin_closes_in_on_the_least_value(seed, sign):
    rng = np.random.default_rng(seed)
    start = GRID[rng.choice(len(GRID), 8, replace=False)]
    found = search(start, 20, sign)
    assert found[:8].min() > 10.0
    assert found.min() - LEAST < 0.12
    every = branin(*GRID.T)
    chance = [every[rng.choice(len(every), 28, replace=False)].min() for _ in range(1000)]
    # As many wells at random miss it by more in nine cases of ten, and half of them by 1 or more.
    assert found.min() < np.quantile(chance, 0.1)
    assert np.median(chance) - LEAST > 1.0
