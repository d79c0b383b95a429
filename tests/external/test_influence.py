"""Sobol' indices against functions whose indices are known in closed form.

Ishigami & Homma 1990, a = 7 and b = 0.1; the g-function of Saltelli & Sobol' 1995; the full
quadratic over a square (V_i = b_i^2 / 3 + 4 b_ii^2 / 45, V_12 = b_12^2 / 9), with the published
coefficients of the reactor yields (Myers, Montgomery & Anderson-Cook 2002, Table 7.6). The digits
of the first two are computed from their published formulas and confirmed by quadrature.
"""

from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import binom
from scipy.stats.qmc import Sobol

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Coding, Columns, Continuous
from muntin.surrogate.fit import family_of, fit_surrogate
from muntin.surrogate.influence import effects, lobatto, product_grid, surface_effects
from muntin.surrogate.priors import priors_of
from tests.surrogate.problems import model_of

DATA = Path(__file__).parent / "data"
ISHIGAMI_FIRST = np.array([0.3139051911, 0.4424111448, 0.0])
ISHIGAMI_TOTAL = np.array([0.5575888552, 0.4424111448, 0.2436836641])
REACTOR = {"b1": 0.932541, "b2": 0.577712, "b12": 0.125000, "b11": -1.308555, "b22": -0.933442}
REACTOR_FIRST = np.array([0.6989239838, 0.2983312637])
REACTOR_PRODUCT = 0.0027447526


def on_grid(function, x, factors):
    return function(np.meshgrid(*[x] * factors, indexing="ij"))[None]


def ishigami(x):
    """Over coded columns, which stand for -pi to pi."""
    a, b, c = (np.pi * column for column in x)
    return np.sin(a) + 7.0 * np.sin(b) ** 2 + 0.1 * c**4 * np.sin(a)


def reactor(x):
    p = REACTOR
    squares = p["b11"] * x[0] ** 2 + p["b22"] * x[1] ** 2
    return p["b1"] * x[0] + p["b2"] * x[1] + p["b12"] * x[0] * x[1] + squares


# --- the functions themselves --------------------------------------------------------------------


@pytest.mark.parametrize(("points", "within"), [(20, 1e-9), (11, 5e-4)])
def test_ishigami(points, within):
    """11 points are what the tool takes for three factors."""
    x, w = lobatto(points)
    found = effects(on_grid(ishigami, x, 3), [w] * 3)
    assert found.first[0] == pytest.approx(ISHIGAMI_FIRST, abs=within)
    assert found.total[0] == pytest.approx(ISHIGAMI_TOTAL, abs=within)


@pytest.mark.parametrize(
    ("a", "first", "total"),
    [
        (
            (0.0, 0.5, 3.0, 9.0, 99.0, 99.0),
            (0.58678119, 0.26079164, 0.03667382, 0.00586781, 5.868e-05, 5.868e-05),
            (0.69008589, 0.35617336, 0.05633354, 0.00917058, 9.201e-05, 9.201e-05),
        ),
        (
            (0.0, 1.0, 4.5, 9.0, 99.0, 99.0, 99.0, 99.0),
            (0.71619217, 0.17904804, 0.02367577, 0.00716192, *[7.162e-05] * 4),
            (0.78714413, 0.24219819, 0.03431691, 0.01046039, *[1.0495e-04] * 4),
        ),
    ],
    ids=["six", "eight"],
)
def test_g_function(a, first, total):
    """It has a kink in the middle: three points on either side are exact."""
    half, w = lobatto(3)
    x = np.concatenate([0.25 + 0.25 * half, 0.75 + 0.25 * half])
    values = 1.0
    for i, ai in enumerate(a):
        g = (np.abs(4.0 * x - 2.0) + ai) / (1.0 + ai)
        values = np.multiply.outer(values, g) if i else g
    found = effects(values[None], [np.concatenate([w, w]) / 2.0] * len(a))
    assert found.first[0] == pytest.approx(first, abs=6e-9)
    assert found.total[0] == pytest.approx(total, abs=6e-9)


def test_quadratic():
    x, w = lobatto(4)
    found = effects(on_grid(reactor, x, 2), [w, w])
    assert found.first[0] == pytest.approx(REACTOR_FIRST, abs=1e-6)
    assert found.total[0] == pytest.approx(REACTOR_FIRST + REACTOR_PRODUCT, abs=1e-6)


# --- through fitted surrogates -------------------------------------------------------------------


def interval(values):
    return np.quantile(values, [0.025, 0.975], axis=0)


@cache
def ishigami_fitted():
    X = 2.0 * Sobol(3, rng=np.random.default_rng(1)).random(256) - 1.0
    y = ishigami(X.T) + 0.01 * np.random.default_rng(2).standard_normal(256)
    data = Readings(X=X, y=y, sd=np.zeros(256))
    priors = priors_of("real", (y.min(), y.max()))
    fit = fit_surrogate("gp", data, "real", Columns.plain(3), priors, 1)
    grid = product_grid(Coding((Continuous(low=-1.0, high=1.0),) * 3))
    return surface_effects(fit.surface, grid, 400, np.random.default_rng(3))


def test_ishigami_read_at_256_points():
    found = ishigami_fitted()
    assert found.first.mean(axis=0) == pytest.approx(ISHIGAMI_FIRST, abs=0.02)
    assert found.total.mean(axis=0) == pytest.approx(ISHIGAMI_TOTAL, abs=0.02)


def test_ishigami_lies_in_the_intervals():
    """S_3 = 0 and ST_2 = S_2 are bounds that no posterior of a smooth surface puts weight on."""
    low, high = interval(ishigami_fitted().first[:, :2])
    assert (low <= ISHIGAMI_FIRST[:2]).all()
    assert (ISHIGAMI_FIRST[:2] <= high).all()
    low, high = interval(ishigami_fitted().total[:, [0, 2]])
    assert (low <= ISHIGAMI_TOTAL[[0, 2]]).all()
    assert (ISHIGAMI_TOTAL[[0, 2]] <= high).all()
    assert interval(ishigami_fitted().first[:, 2])[0] < 0.001


def test_reactor_yields_through_the_quadratic_under_wide_priors():
    """The two blocks share an inside error each; factors over the square of the coded design."""
    table = pd.read_csv(DATA / "reactor_two_blocks.csv")
    X = np.column_stack([(table["time"] - 85.0) / 5.0, (table["temp"] - 175.0) / 5.0])
    block = (table["block"] - 1).to_numpy()
    data = Readings(X=X, y=table["yield_"].to_numpy(), sd=np.zeros(len(X)), inside=(block,))
    wide = {"mean_sd": 100.0, "process_sd": (10.0, 0.1), "curvature_sd": (10.0, 0.1)}
    priors = priors_of("real", (70.0, 90.0)).with_overrides({**wide, "mean": 80.0})
    fit = fit_surrogate("quadratic", data, "real", Columns.plain(2), priors, 1)
    grid = product_grid(Coding((Continuous(low=-1.0, high=1.0),) * 2))
    found = surface_effects(fit.surface, grid, 400, np.random.default_rng(4))
    assert found.first.mean(axis=0) == pytest.approx(REACTOR_FIRST, abs=0.01)
    for values, expected in (
        (found.first, REACTOR_FIRST),
        (found.total, REACTOR_FIRST + REACTOR_PRODUCT),
    ):
        low, high = interval(values)
        assert (low <= expected).all()
        assert (expected <= high).all()
        assert (high - low < 0.2).all()


# --- calibration ---------------------------------------------------------------------------------

SETS, DRAWS, WELLS = 200, 200, 14
CODING = Coding((Continuous(low=0.0, high=1.0),) * 2)


@cache
def ranks():
    """Share of draws (SETS, 6) below the true first, total and change of two factors, the truth
    drawn from the prior of the Gaussian process, read with its noise.
    """
    priors, grid, below = priors_of("real", (-1.0, 1.0)), product_grid(CODING), []
    for seed in range(SETS):
        rng = np.random.default_rng((seed, 11))
        X = rng.uniform(-1.0, 1.0, (WELLS, 2))
        blank = Readings(X=X, y=np.zeros(WELLS), sd=np.zeros(WELLS))
        layout = model_of("gp", blank, "real", CODING.columns, priors).layout
        theta = layout.theta(rng.normal(size=(1, len(layout))))
        family, both = family_of("gp", CODING.columns, priors), np.concatenate([grid.points(), X])
        K = family.covariance(layout.family(theta), both, both)[0]
        root = np.linalg.cholesky(K + 1e-9 * K.max() * np.eye(len(both)))
        f = priors.mean + root @ rng.normal(size=len(both))
        y = f[grid.size :] + layout.noise(theta)[0] * rng.normal(size=WELLS)
        fit = fit_surrogate(
            "gp", Readings(X=X, y=y, sd=blank.sd), "real", CODING.columns, priors, 1
        )
        found = surface_effects(fit.surface, grid, DRAWS, rng)
        truth = effects(f[: grid.size].reshape(1, *grid.shape), grid.weights)
        pairs = zip(
            (found.first, found.total, found.change),
            (truth.first, truth.total, truth.change),
            strict=True,
        )
        below.append(np.concatenate([(one < true).mean(axis=0) for one, true in pairs]))
    return np.array(below)


@pytest.mark.slow
def test_intervals_hold_the_truth_as_often_as_they_say():
    """Of 200 truths 95 % lie in their 95 % interval and half in the middle half: binomial limits,
    together 99 % over twelve counts.
    """
    u = ranks()
    for low, high in ((0.025, 0.975), (0.25, 0.75)):
        inside = ((u > low) & (u < high)).sum(axis=0)
        least, most = binom.ppf([0.005 / 12, 1.0 - 0.005 / 12], SETS, high - low)
        assert (inside >= least).all()
        assert (inside <= most).all()
