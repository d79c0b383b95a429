"""Simulation-based calibration of the whole fast engine (`pytest -m slow`).

Truth and readings are drawn from the model; the posterior distribution function at the truth must
then be uniform (Cook, Gelman & Rubin 2006), which its empirical distribution is held to with
simultaneous bands (Sailynoja, Burkner & Vehtari 2022): N = 200 sets, K = 20 points, 99 % bands are
binomial quantiles at gamma = 0.001048, exact coverage 0.99013, computed by an exact chain and by
Monte Carlo.
"""

from functools import cache

import numpy as np
import pytest
from scipy.special import expit, ndtr
from scipy.stats import binom

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.fit import family_of, fit_surrogate
from muntin.surrogate.priors import priors_of
from muntin.window.probability import Target, mean_meets, well_meets
from tests.surrogate.problems import model_of, surface_covariances

pytestmark = pytest.mark.slow

SETS, POINTS, GAMMA = 200, 20, 0.001048
WELLS, PLATES = 18, 3
COLUMNS = Columns.plain(2)
PRIORS = priors_of("fraction", (0.0, 1.0))
FAMILIES = pytest.mark.parametrize("name", ["gp", "quadratic"])


def bands():
    """Least and largest count of values below k / 20, k = 1 to 19."""
    z = np.arange(1, POINTS) / POINTS
    return binom.ppf(GAMMA / 2.0, SETS, z), binom.ppf(1.0 - GAMMA / 2.0, SETS, z)


@cache
def simulated(name):
    """Posterior distribution functions at the truth (SETS, quantities); chances and outcomes."""
    values, chances = [], []
    for seed in range(SETS):
        rng = np.random.default_rng((seed, 7))
        X = np.concatenate([rng.uniform(-1.0, 1.0, (12, 2)), rng.uniform(-1.0, 1.0, (1, 2))])
        rows = np.concatenate([np.arange(12), rng.integers(0, 12, WELLS - 12)])
        plate = rng.integers(0, PLATES, WELLS)
        blank = Readings(
            X=X[rows], y=np.zeros(WELLS), sd=np.zeros(WELLS), inside=(plate,), scale=(plate,)
        )
        layout = model_of(name, blank, columns=COLUMNS).layout
        theta = layout.theta(rng.normal(size=(1, len(layout))))
        noise, inside, scale = (
            float(np.ravel(sd(theta))[0])
            for sd in (layout.noise, layout.inside_sd, layout.scale_sd)
        )
        K = surface_covariances(family_of(name, COLUMNS, PRIORS), layout.family(theta)[0], X, X)
        root = np.linalg.cholesky(K + 1e-9 * np.eye(13))
        f = PRIORS.mean + root @ rng.normal(size=13)

        ceiling = layout.ceiling_of(theta)[0]

        def read(latent, moved, scaled, rng=rng, noise=noise, ceiling=ceiling):
            g = (1.0 + scaled) * ceiling * expit(latent + moved)
            return g + noise * rng.normal(size=np.shape(latent))

        y = read(
            f[rows],
            inside * rng.normal(size=PLATES)[plate],
            scale * rng.normal(size=PLATES)[plate],
        )
        data = Readings(X=X[rows], y=y, sd=blank.sd, inside=(plate,), scale=(plate,))
        fit = fit_surrogate(name, data, "fraction", COLUMNS, PRIORS, 1)
        below = fit.weights @ (fit.theta < theta)
        mean, variance = fit.surface.moments(X[-1:])
        at_new = fit.surface.weights @ ndtr((f[-1] - mean) / np.sqrt(variance))
        values.append([*below, at_new[0]])
        moments, target = (mean, variance), Target(low=0.7)
        well = read(f[-1:], inside * rng.normal(), scale * rng.normal())[0]
        chances.append(
            [
                (mean_meets(fit.surface, moments, target)[0], ceiling * expit(f[-1]) >= 0.7),
                (well_meets(fit.surface, moments, target)[0], well >= 0.7),
            ]
        )
    return np.array(values), np.array(chances, dtype=float)


def uniform(u):
    least, most = bands()
    counts = (u[:, None] < np.arange(1, POINTS) / POINTS).sum(0)
    return (counts >= least).all() and (counts <= most).all()


@FAMILIES
def test_the_surface_lies_anywhere_in_its_posterior_alike(name):
    """The latent value at a new condition."""
    assert uniform(simulated(name)[0][:, -1])


@pytest.mark.xfail(reason="64 nodes cut the tails of the ceiling's gap and of the process sd")
@FAMILIES
def test_hyperparameters_lie_anywhere_in_their_posterior_alike(name):
    """Of 200 truths 25 lie below the 5 % point of the gap (gp), 23 above the 95 % point of the
    process sd (quadratic), where 10 should; with 512 nodes most of these come back inside.
    """
    values, _ = simulated(name)
    assert all(uniform(u) for u in values[:, :-1].T)


@FAMILIES
@pytest.mark.parametrize("which", [0, 1], ids=["p_mean", "p_well"])
def test_what_is_said_to_happen_happens_as_often(name, which):
    """Successes less the sum of their chances, in its own sd, and Brier's score the same way."""
    p, hit = simulated(name)[1][:, which].T
    spread = np.sqrt((p * (1.0 - p)).sum())
    assert abs((hit - p).sum()) < 2.58 * spread
    score = (hit - p) ** 2
    expected = p * (1.0 - p)
    brier_sd = np.sqrt((expected * (1.0 - 2.0 * p) ** 2).sum())
    assert abs((score - expected).sum()) < 2.58 * brier_sd


def test_the_bands_are_those_tabulated():
    """Counts allowed at 0.1 and 0.5: 8 to 35 and 77 to 123."""
    least, most = bands()
    assert (least[1], most[1]) == (8, 35)
    assert (least[9], most[9]) == (77, 123)
