"""The quadratic surrogate under flat priors against certified and published least-squares fits.

With flat priors of the coefficients and the noise held at the residual sd, posterior means and sds
are the least-squares estimates and their standard errors. And the evidence, as a function of the
noise, is that of restricted maximum likelihood: its slope in ln sigma is SSE / sigma^2 - (n - p),
nought at the published residual sd.
"""

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import t as student

from muntin.surrogate.evidence import slope
from muntin.window.probability import Target, mean_meets, process_quantile, well_meets
from tests.external.flat import Flat, flat_model, over_noise

DATA = Path(__file__).parent / "data"


def table(name):
    return pd.read_csv(DATA / f"{name}.csv")


def reading_slope(model, noise, block_sd=None):
    """Slope of the log evidence in ln sigma at the first node."""
    return slope(model, Flat.of(model, noise, block_sd).evidence)[0, 0]


def expect_residual_sd(model, sd, freedom, rel):
    """The slope in ln sigma is (n - p) (sd^2 / sigma^2 - 1), which holds sd and n - p alike."""
    for step in (-0.5, 0.0, 0.7):
        expected = freedom * (np.exp(-2.0 * step) - 1.0)
        found = reading_slope(model, sd * np.exp(step))
        assert found == pytest.approx(expected, abs=freedom * rel * np.exp(-2.0 * step))


# --- NIST StRD: certified to 15 digits -----------------------------------------------------------


@pytest.mark.parametrize(("name", "degree", "size"), [("norris", 1, 1e6), ("pontius", 2, 1e3)])
def test_nist_certified_line_and_quadratic(name, degree, size):
    """NIST/ITL Statistical Reference Datasets, Linear Least Squares: Norris, Pontius.

    Coefficients in raw units follow from the coded ones. Nine digits are asked for: the constant
    of Norris, a thousandth of what it is the difference of, keeps ten.
    """
    certified = json.loads((DATA / "nist_certified.json").read_text())[name]
    data = table(f"nist_{name}")
    x, y = data["x"].to_numpy(), data["y"].to_numpy()
    middle, half = (x.max() + x.min()) / 2.0, (x.max() - x.min()) / 2.0
    terms = ((), (0,), (0, 0))[: degree + 1]
    model = flat_model(((x - middle) / half)[:, None], y, size, terms)
    sd = certified["resid_sd"]
    nodes = Flat.of(model, sd).nodes
    # Rows: the raw coefficient of 1, x, x^2 in terms of the coded ones.
    u = -middle / half
    back = np.array([[1.0, u, u**2], [0.0, 1.0 / half, 2.0 * u / half], [0.0, 0.0, half**-2.0]])
    back = back[: degree + 1, : degree + 1]
    raw = back @ (nodes.mean[0] + np.eye(degree + 1)[0] * y.mean())
    error = np.sqrt(np.diag(back @ nodes.V[0] @ back.T))
    for i in range(degree + 1):
        estimate, standard_error = certified["coef"][i], certified["se"][i]
        assert raw[i] == pytest.approx(estimate, rel=1e-9)
        assert error[i] == pytest.approx(standard_error, rel=1e-9)
    expect_residual_sd(model, sd, len(y) - degree - 1, rel=1e-8)


# --- reactor yield in two blocks -----------------------------------------------------------------

# Myers, Montgomery & Anderson-Cook, Response Surface Methodology (2002), table 7.6: data and fit
# from memory, the whole fit reproduced from the data.
REACTOR = {
    (0,): (0.932541, 0.057699),
    (1,): (0.577712, 0.057699),
    (0, 1): (0.125000, 0.081592),
    (0, 0): (-1.308555, 0.060064),
    (1, 1): (-0.933442, 0.060064),
}


def reactor():
    data = table("reactor_two_blocks")
    X = np.column_stack([(data["time"] - 85.0) / 5.0, (data["temp"] - 175.0) / 5.0])
    return flat_model(X, data["yield_"], 1e3, block=data["block"] - 1)


def test_reactor_with_a_free_block():
    """The block as an inside error of any size: coefficients as published, level within a block."""
    model = reactor()
    fit = Flat.of(model, 0.163185, block_sd=1e3)
    estimates, errors = fit.coefficients()
    for term, (estimate, error) in REACTOR.items():
        assert estimates[term] == pytest.approx(estimate, abs=1e-6)
        assert errors[term] == pytest.approx(error, abs=1e-6)
    origin = [[0.0, 0.0]]
    (first, first_sd), (second, _) = (fit.in_block(origin, block) for block in (0, 1))
    assert first[0] == pytest.approx(84.095427, abs=1e-5)
    assert first_sd[0] == pytest.approx(0.079631, abs=1e-5)
    assert second[0] - first[0] == pytest.approx(-4.457530, abs=1e-5)
    best = [[0.372295, 0.334380]]
    mean, sd = fit.in_block(best, 0)
    assert (mean[0], sd[0]) == pytest.approx((84.365605, 0.079304), abs=1e-5)


def test_reactor_has_its_stationary_point_where_published():
    """86.8615 min and 176.6719 F, eigenvalues -0.923303 and -1.318695, from the surface's means."""
    fit = Flat.of(reactor(), 0.163185, block_sd=1e3)
    b, _ = fit.coefficients()
    B = np.array([[b[0, 0], b[0, 1] / 2.0], [b[0, 1] / 2.0, b[1, 1]]])
    stationary = -0.5 * np.linalg.solve(B, [b[0,], b[1,]])
    assert stationary == pytest.approx([0.372295, 0.334380], abs=2e-6)
    assert 85.0 + 5.0 * stationary[0] == pytest.approx(86.8615, abs=1e-4)
    assert 175.0 + 5.0 * stationary[1] == pytest.approx(176.6719, abs=1e-4)
    assert np.linalg.eigvalsh(B) == pytest.approx([-1.318695, -0.923303], abs=2e-6)


def test_reactor_with_a_free_block_has_its_residual_sd():
    """0.163185 on 7 degrees of freedom; a flat block error costs one, as a block term does."""
    model = reactor()
    for step in (-0.4, 0.0, 0.4):
        expected = 7.0 * (np.exp(-2.0 * step) - 1.0)
        found = reading_slope(model, 0.163185 * np.exp(step), block_sd=1e3)
        assert found == pytest.approx(expected, abs=2e-4)


def test_reactor_without_its_block_has_eighteen_times_the_residual_sd():
    """2.952328: a plate effect must not be ignored."""
    data = table("reactor_two_blocks")
    model = flat_model(data[["x1", "x2"]], data["yield_"], 1e4)
    expect_residual_sd(model, 2.952328, 8, rel=1e-5)


def test_reactor_with_a_random_block():
    """Restricted maximum likelihood by R's nlme: block sd 3.151351, residual sd 0.163185,
    intercept 81.866662, other coefficients as with a fixed block; log-likelihood -6.876253.
    """
    model = reactor()
    fit = Flat.of(model, 0.163185, block_sd=3.151351)
    estimates, errors = fit.coefficients()
    assert estimates[()] == pytest.approx(81.866662, abs=2e-5)
    for term, (estimate, error) in REACTOR.items():
        assert estimates[term] == pytest.approx(estimate, abs=1e-6)
        assert errors[term] == pytest.approx(error, abs=1e-6)
    gradient = slope(model, fit.evidence)[0]
    assert gradient[:2] == pytest.approx([0.0, 0.0], abs=1e-4)
    # The evidence holds the six flat priors' densities, which the restricted likelihood leaves out.
    flat = 6 * 0.5 * np.log(2.0 * np.pi * 1e3**2)
    assert fit.evidence.log[0] + flat == pytest.approx(-6.876253, abs=1e-5)


# --- two blocks with a ridge ---------------------------------------------------------------------


def test_two_blocks_with_a_ridge():
    """Box, Hunter & Hunter (1978), time and temperature: from memory, fit reproduced.

    Published without the block, to two decimals: 87.36 - 1.39 x1 + 0.37 x2 - 2.15 x1^2 - 3.12 x2^2
    - 4.88 x1 x2. With it: constant 88.2602 in block 1, block -1.7705, squares -2.1604 and -3.1298.
    """
    data = table("bhh_two_blocks")
    X = np.column_stack([(data["time"] - 90.0) / 10.0, (data["temp"] - 145.0) / 5.0])
    plain, _ = Flat.of(flat_model(X, data["yield_"], 1e4), 2.0).coefficients()
    published = {
        (): 87.36,
        (0,): -1.39,
        (1,): 0.37,
        (0, 0): -2.15,
        (1, 1): -3.12,
        (0, 1): -4.88,
    }
    assert plain == pytest.approx(published, abs=0.006)
    model = flat_model(X, data["yield_"], 1e4, block=data["block"] - 1)
    fit = Flat.of(model, 2.0, block_sd=1e4)
    blocked, _ = fit.coefficients()
    assert (blocked[0, 0], blocked[1, 1]) == pytest.approx((-2.1604, -3.1298), abs=1e-4)
    (first, _), (second, _) = (fit.in_block([[0.0, 0.0]], block) for block in (0, 1))
    assert (first[0], second[0] - first[0]) == pytest.approx((88.2602, -1.7705), abs=1e-4)


# --- chemical vapour deposition, two responses ---------------------------------------------------

FULL = ((), (0,), (1,), (0, 1), (0, 0), (1, 1))


@pytest.mark.parametrize(
    ("response", "terms", "coefficients", "sd", "freedom"),
    [
        ("unif", FULL, (5.8661, -1.9097, -0.2241, 1.6862, 0.1337, 0.0337), 0.7235, 5),
        ("unif", FULL[:4], (5.9273, -1.9097, -0.2241, 1.6862), 0.6145, 7),
        ("stress", FULL, (7.7900, 0.7359, 0.4969, 0.0694, -0.5287, -0.1187), 0.0771, 5),
        ("stress", ((), (0,), (1,), (0, 0)), (7.7341, 0.7359, 0.4969, -0.4943), 0.0883, 7),
    ],
)
def test_tungsten_deposition(response, terms, coefficients, sd, freedom):
    """NIST/SEMATECH e-Handbook of Statistical Methods, 5.4.7.3, coded to two decimals as there.

    Data from memory; the published fit of the uniformity is reproduced in full, the stress
    recomputed.
    """
    data = table("nist_cvd_two_responses")
    X = np.column_stack([(data["pressure"] - 42.0) / 38.0, (data["ratio"] - 6.0) / 4.0])
    X = np.round(X, 2)
    model = flat_model(X, data[response], 1e3, terms)
    fitted, _ = Flat.of(model, sd).coefficients()
    found = [fitted[term] for term in terms]
    assert found == pytest.approx(coefficients, abs=6e-5)
    # The residual sd is printed to four decimals.
    expect_residual_sd(model, sd, freedom, rel=2.0 * 5e-5 / sd)


# --- rotatable design of 13 runs -----------------------------------------------------------------

# Montgomery, Design and Analysis of Experiments, example 11.2: data and fit from memory, the fit
# reproduced; standard errors and what follows recomputed.
DESIGN_TERMS = ((), (0,), (1,), (0, 1), (0, 0), (1, 1))
DESIGN = (79.939955, 0.995050, 0.515203, 0.250000, -1.376449, -1.001336)
DESIGN_SE = (0.119089, 0.094155, 0.094155, 0.133145, 0.100984, 0.100984)
DESIGN_SD = np.sqrt(0.496373 / 7.0)
# x1, x2: mean, its standard error, P(mean >= 79.5), P(new run >= 79.5).
DESIGN_POINTS = {
    (0.0, 0.0): (79.93995, 0.11909, 0.996144, 0.912382),
    (0.389, 0.306): (80.21239, 0.11615, 0.999762, 0.978015),
    (1.0, 1.0): (79.32242, 0.21053, 0.213424, 0.308520),
    (-1.0, -1.0): (76.30192, 0.21053, 1e-06, 1.6e-05),
    (1.0, 0.0): (79.55856, 0.13806, 0.657899, 0.574615),
}


def rotatable():
    data = table("montgomery_ccd")
    return flat_model(data[["x1", "x2"]], data["y"], 1e4, DESIGN_TERMS)


def test_rotatable_design():
    fit = Flat.of(rotatable(), DESIGN_SD)
    estimates, errors = fit.coefficients()
    assert tuple(estimates.values()) == pytest.approx(DESIGN, abs=1e-6)
    assert tuple(errors.values()) == pytest.approx(DESIGN_SE, abs=1e-6)
    mean, covariance = fit.at(list(DESIGN_POINTS))
    expected = np.array(list(DESIGN_POINTS.values()))
    assert mean == pytest.approx(expected[:, 0], abs=1e-5)
    assert np.sqrt(np.diag(covariance)) == pytest.approx(expected[:, 1], abs=1e-5)
    expect_residual_sd(rotatable(), DESIGN_SD, 7, rel=1e-5)


def test_probabilities_of_the_rotatable_design_are_students_t():
    """With sigma integrated over d ln sigma, the chances of meeting 79.5 or more are Student's t
    on 7 degrees of freedom, as tabulated; at (1, 1) a new run is likelier to meet it than the
    mean, at (1, 0) less likely.
    """
    surface = over_noise(rotatable(), DESIGN_SD, 7)
    points = np.array(list(DESIGN_POINTS))
    expected = np.array(list(DESIGN_POINTS.values()))
    moments, target = surface.moments(points), Target(low=79.5)
    p_mean, p_well = (meets(surface, moments, target) for meets in (mean_meets, well_meets))
    assert p_mean == pytest.approx(expected[:, 2], abs=2e-6)
    assert p_well == pytest.approx(expected[:, 3], abs=2e-6)
    assert p_well[2] > p_mean[2]
    assert p_well[4] < p_mean[4]


def test_quantiles_of_the_rotatable_design_are_students_t():
    surface = over_noise(rotatable(), DESIGN_SD, 7)
    points = np.array(list(DESIGN_POINTS))
    expected = np.array(list(DESIGN_POINTS.values()))
    for level in (0.05, 0.5, 0.975):
        quantile = expected[:, 0] + student.ppf(level, 7) * expected[:, 1]
        found = process_quantile(surface, surface.moments(points), level)
        assert found == pytest.approx(quantile, abs=3e-5)


# --- factorials ----------------------------------------------------------------------------------


def test_replicated_factorial():
    """Montgomery, 2^2 with three replicates: 27.5 + 4.1667 A - 2.5 B, AB effect 1.6667, pure error
    31.3333 on 8 degrees of freedom. Data and effects from memory, reproduced.
    """
    data = table("fact22_replicated")
    model = flat_model(data[["A", "B"]], data["y"], 1e4, ((), (0,), (1,), (0, 1)))
    sd = np.sqrt(31.3333 / 8.0)
    estimates, errors = Flat.of(model, sd).coefficients()
    effects = {(): 27.5, (0,): 8.3333 / 2.0, (1,): -5.0 / 2.0, (0, 1): 1.6667 / 2.0}
    assert estimates == pytest.approx(effects, abs=1e-4)
    assert list(errors.values()) == pytest.approx([sd / np.sqrt(12.0)] * 4, rel=1e-6)
    expect_residual_sd(model, sd, 8, rel=1e-5)


@pytest.mark.parametrize(
    ("name", "rows", "curvature", "error"),
    [("fact22_centre", 9, -0.035, 0.0430), ("montgomery_ccd", 9, -2.19, 0.0530)],
)
def test_curvature_of_a_factorial_with_centre_points(name, rows, curvature, error):
    """Mean of the corners less the centre, and the pure error (Montgomery; the first published, as
    read, the second from memory): -0.035 with mean square 0.0430; square root of
    10.658 (1/4 + 1/5) = 2.19 with 0.0530.
    """
    data = table(name).head(rows)
    terms = ((), (0,), (1,), (0, 1), (0, 0))
    model = flat_model(data[["x1", "x2"]], data["y"], 1e4, terms)
    fit = Flat.of(model, np.sqrt(error))
    corners = [[a, b] for a in (-1.0, 1.0) for b in (-1.0, 1.0)]
    mean, covariance = fit.at([*corners, [0.0, 0.0]])
    contrast = np.array([0.25, 0.25, 0.25, 0.25, -1.0])
    assert contrast @ mean == pytest.approx(curvature, abs=1e-3)
    assert contrast @ covariance @ contrast == pytest.approx(error * (1 / 4 + 1 / 5), rel=1e-5)
    expect_residual_sd(model, np.sqrt(error), 4, rel=1e-3)


def test_duplicated_cube():
    """Box, Hunter & Hunter, pilot plant 2^3 in duplicate: effects T 23, C -5, K 1.5, TC 1.5, TK 10,
    CK 0, mean 64.25. From memory, reproduced. The residual holds TCK 0.5 beside the pure error, so
    its sum of squares is 8 * 8 + 4 * 0.5^2 = 65 on 9 degrees of freedom.
    """
    data = table("bhh_pilot_2cubed")
    terms = ((), (0,), (1,), (2,), (0, 1), (0, 2), (1, 2))
    model = flat_model(data[["T", "C", "K"]], data["y"], 1e4, terms)
    estimates, _ = Flat.of(model, np.sqrt(65.0 / 9.0)).coefficients()
    effects = [64.25, 23 / 2, -5 / 2, 1.5 / 2, 1.5 / 2, 10 / 2, 0.0]
    assert list(estimates.values()) == pytest.approx(effects, abs=1e-5)
    expect_residual_sd(model, np.sqrt(65.0 / 9.0), 9, rel=1e-6)
