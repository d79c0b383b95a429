"""The quadratic surrogate under flat priors against certified regressions and analyses of variance.

NIST/ITL Statistical Reference Datasets: Linear Least Squares Regression and Analysis of Variance
(public domain); Norris and Pontius stand in test_least_squares. Factors are coded to [-1, 1], and
the certified coefficients of the raw factors turned into coded ones in rational numbers. Each
prior sd is 4e6 residual sds, which leaves eight digits or more.
"""

import json
from fractions import Fraction
from math import comb
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from muntin.surrogate.evidence import slope
from tests.external.flat import Flat, flat_model

DATA = Path(__file__).parent / "data"
CERTIFIED = json.loads((DATA / "nist_certified.json").read_text())
SIZE = 4e6
# Half of what the certified sets Wampler3 to 5 add, 1, 100 and 10000 times, to the polynomial.
WAMPLER = [759, -2048, 2048, -2048, 2523, -2048, 2048, -2048, 1838, -2048, 2048]


def polynomial(name):
    """x (n,), y (n,) and the degree of a set in one factor."""
    if name == "filip":
        data = pd.read_csv(DATA / "nist_filip.csv")
        return data["x"].to_numpy(), data["y"].to_numpy(), 10
    x = np.arange(21.0)
    if name == "wampler2":
        return x, sum((x / 10.0) ** k for k in range(6)), 5
    times = {"wampler1": 0.0, "wampler3": 1.0, "wampler4": 100.0, "wampler5": 10000.0}[name]
    added = np.array(WAMPLER + WAMPLER[-2::-1], dtype=float)
    return x, sum(x**k for k in range(6)) + times * added, 5


def exact(value):
    """The decimal number as it is printed."""
    return Fraction(repr(float(value)))


def coded_coefficients(raw, middle, half):
    """Coefficients of powers of (x - middle) / half from those of powers of x."""
    m, h = exact(middle), exact(half)
    size = range(len(raw))
    return [
        float(h**j * sum(exact(raw[k]) * comb(k, j) * m ** (k - j) for k in size[j:])) for j in size
    ]


def raw_errors(V, middle, half):
    """Standard errors of powers of x from the covariance V of powers of (x - middle) / half."""
    back = np.zeros_like(V)
    for k in range(len(V)):
        for j in range(k + 1):
            back[j, k] = comb(k, j) * (-middle) ** (k - j) / half**k
    return np.sqrt(np.diag(back @ V @ back.T))


def fitted(X, y, terms, sd):
    """Coefficients, their covariance and the slope in ln sigma at the residual sd.

    The slope is SSE / sigma^2 - (n - p): nought there, and p - n for any sigma if nothing is left.
    """
    noise = sd if sd > 0.0 else 1.0
    model = flat_model(X, y, SIZE * noise, terms)
    fit = Flat.of(model, noise)
    estimates, _ = fit.coefficients()
    return np.array(list(estimates.values())), fit.nodes.V[0], slope(model, fit.evidence)[0, 0]


POLYNOMIALS = ["wampler1", "wampler2", "wampler3", "wampler4", "wampler5", "filip"]


@pytest.mark.parametrize("name", POLYNOMIALS)
def test_certified_polynomials(name):
    """Wampler's five of degree 5 and Filip's of degree 10.

    Sets 1 and 2 fit without a residual. Filip's coded powers are collinear to 1e-5, and the
    plainly squared equations of the posterior keep seven digits of its coefficients.
    """
    certified = CERTIFIED[name]
    x, y, degree = polynomial(name)
    middle, half = (x.max() + x.min()) / 2.0, (x.max() - x.min()) / 2.0
    terms = tuple((0,) * k for k in range(degree + 1))
    sd = certified["resid_sd"]
    found, V, slope_found = fitted(((x - middle) / half)[:, None], y, terms, sd)
    expected = np.array(coded_coefficients(certified["coef"], middle, half))
    assert found == pytest.approx(expected, rel=1e-7 if name == "filip" else 1e-9)
    freedom = len(y) - degree - 1
    if sd == 0.0:
        assert slope_found == pytest.approx(-freedom, abs=1e-9)
        return
    assert slope_found == pytest.approx(0.0, abs=1e-8 * freedom)
    assert raw_errors(V, middle, half) == pytest.approx(certified["se"], rel=1e-8)


@pytest.mark.parametrize("name", ["filip", "wampler3"])
def test_certified_residual_sd(name):
    """The slope (n - p) (sd^2 / sigma^2 - 1) away from it, which holds sd and n - p alike."""
    x, y, degree = polynomial(name)
    X = ((2.0 * x - x.max() - x.min()) / (x.max() - x.min()))[:, None]
    terms = tuple((0,) * k for k in range(degree + 1))
    freedom = len(y) - degree - 1
    for step in (-0.5, 0.7):
        _, _, found = fitted(X, y, terms, CERTIFIED[name]["resid_sd"] * np.exp(step))
        assert found == pytest.approx(freedom * (np.exp(-2.0 * step) - 1.0), rel=1e-7)


def test_certified_predictions_of_filip():
    """The curve does not hang on how its collinear powers share it out.

    Certified coefficients have 15 digits and their terms reach 5e6: 2.5e-8 is left open by them.
    """
    x, y, degree = polynomial("filip")
    X = ((2.0 * x - x.max() - x.min()) / (x.max() - x.min()))[:, None]
    sd = CERTIFIED["filip"]["resid_sd"]
    model = flat_model(X, y, SIZE * sd, tuple((0,) * k for k in range(degree + 1)))
    raw = CERTIFIED["filip"]["coef"]
    curve = [float(sum(exact(b) * exact(v) ** k for k, b in enumerate(raw))) for v in x]
    assert Flat.of(model, sd).at(X)[0] == pytest.approx(curve, abs=2.5e-8)


def test_certified_multiple_regression():
    """Longley: employment over six collinear series, seven coefficients and their errors."""
    certified, data = CERTIFIED["longley"], pd.read_csv(DATA / "nist_longley.csv")
    x = data.drop(columns="y").to_numpy(dtype=float)
    middle, half = (x.max(0) + x.min(0)) / 2.0, (x.max(0) - x.min(0)) / 2.0
    terms = ((), *((i,) for i in range(6)))
    sd = certified["resid_sd"]
    found, V, slope_found = fitted((x - middle) / half, data["y"], terms, sd)
    level, *slopes = map(exact, certified["coef"])
    at_middle = level + sum(b * exact(m) for b, m in zip(slopes, middle, strict=True))
    assert found[0] == pytest.approx(float(at_middle), rel=1e-9)
    assert found[1:] / half == pytest.approx(certified["coef"][1:], rel=1e-9)
    assert np.sqrt(np.diag(V))[1:] / half == pytest.approx(certified["se"][1:], rel=1e-9)
    constant = np.array([1.0, *(-middle / half)])
    assert np.sqrt(constant @ V @ constant) == pytest.approx(certified["se"][0], rel=1e-9)
    assert slope_found == pytest.approx(0.0, abs=1e-8)


# --- One-way analysis of variance: the treatment as an error that a plate shares ------------------


def treatments(name):
    """Group (n,) and y (n,): silicon resistivity, atomic weight of silver, and two of Simon &
    Lesage (1989), whose treatments of 21 readings have the means 0.4, 0.3, 0.5, 0.3, 0.5, ...
    above 1 or 1e6, and whose readings lie 0, -0.1, 0.1, -0.1, 0.1, ... from them.
    """
    if name in ("smls01", "smls04"):
        tenths = np.array([4, 3, 5, 3, 5, 3, 5, 3, 5])[:, None] + np.array([0] + [-1, 1] * 10)
        y = (10.0 * CERTIFIED[name]["offset"] + tenths) / 10.0
        return np.repeat(np.arange(9), 21), y.ravel()
    data = pd.read_csv(DATA / f"nist_{name}.csv")
    return data["instrument"].to_numpy() - 1, data["y"].to_numpy()


@pytest.mark.parametrize(
    ("name", "digits"), [("sirstv", 1e-9), ("atmwtag", 1e-8), ("smls01", 1e-10), ("smls04", 1e-8)]
)
def test_certified_analysis_of_variance(name, digits):
    """Slopes of the evidence in ln sigma and ln tau are those of the certified mean squares.

    The restricted likelihood of k treatments of m readings, n = k m (Searle, Casella & McCulloch
    1992, section 3.8), with l = sigma^2 + m tau^2 and mean squares B between and W within:
    (n - k) (W / sigma^2 - 1) + (k - 1) (sigma^2 / l) (B / l - 1) in ln sigma and
    (k - 1) (m tau^2 / l) (B / l - 1) in ln tau; both nought at the estimates.
    """
    group, y = treatments(name)
    k, n = group.max() + 1, len(y)
    m = n // k
    within, ratio = CERTIFIED[name]["resid_sd"] ** 2, CERTIFIED[name]["f"]
    between = ratio * within
    model = flat_model(np.zeros((n, 1)), y, SIZE * np.sqrt(within), ((),), block=group)
    for step, turn in ((0.0, 0.0), (0.3, -0.2), (-0.4, 0.6)):
        sigma = np.sqrt(within) * np.exp(step)
        tau = np.sqrt((between - within) / m) * np.exp(turn)
        total = sigma**2 + m * tau**2
        excess = (k - 1) * (between / total - 1.0) / total
        expected = [
            (n - k) * (within / sigma**2 - 1.0) + sigma**2 * excess,
            m * tau**2 * excess,
        ]
        found = slope(model, Flat.of(model, sigma, tau).evidence)[0, :2]
        assert found == pytest.approx(expected, abs=digits * n)
