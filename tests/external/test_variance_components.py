"""Sizes of shared errors on balanced published plates and batches.

For balanced data the restricted-likelihood estimates are those of the analysis of variance (Searle,
Casella & McCulloch 1992, section 4.5), so the evidence under flat priors has no slope there.
"""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.special import logsumexp

from muntin.surrogate.cells import Readings, collapse
from muntin.surrogate.coding import Choice, Coding, Columns
from muntin.surrogate.evidence import Model, evaluate, slope
from muntin.surrogate.fit import family_of, fit_surrogate
from muntin.surrogate.priors import LogNormal
from tests.external.flat import flat_priors

DATA = Path(__file__).parent / "data"
# Priors as wide as the built-in table's widest (a factor of 2.7 either way within one sd), and a
# factor of 1.5 off what was published.
LOG_SD, OFF = 1.0, 1.5


def penicillin():
    """Zone diameters of 24 plates by 6 samples: the sample is a choice, the plate an inside error.

    Davies & Goldsmith 1972, as shipped with lme4; mean squares 4.603865 (plates), 0.302415
    (residual), hence variances 0.716908 and 0.302415; reproduced from the data.
    """
    data = pd.read_csv(DATA / "penicillin_plates.csv")
    coding = Coding((Choice(levels=6),))
    readings = Readings(
        X=coding.code([data["sample"].map(ord) - ord("A")]),
        y=data["diameter"].to_numpy(dtype=float),
        sd=np.zeros(len(data)),
        inside=(data["plate"].map(ord).to_numpy() - ord("a"),),
    )
    return readings, coding.columns, np.sqrt(0.302415), np.sqrt(0.716908)


def dyestuff():
    """Yields of 6 batches by 5: nothing but a level, so the one column stays at its centre.

    Davies & Goldsmith 1972, as shipped with lme4; mean squares 11271.50 and 2451.25, hence
    variances 1764.05 (batches) and 2451.25; reproduced from the data.
    """
    data = pd.read_csv(DATA / "dyestuff_yield.csv")
    readings = Readings(
        X=np.zeros((len(data), 1)),
        y=data["Yield"].to_numpy(dtype=float),
        sd=np.zeros(len(data)),
        inside=(data["Batch"].map(ord).to_numpy() - ord("A"),),
    )
    return readings, Columns.plain(1), np.sqrt(2451.25), np.sqrt(1764.05)


BOTH = pytest.mark.parametrize("published", [penicillin, dyestuff])


@BOTH
def test_the_estimates_of_the_analysis_of_variance_are_where_the_evidence_is_flat(published):
    readings, columns, noise, shared = published()
    priors = flat_priors(readings.y.mean(), 1e4)
    model = Model(family_of("quadratic", columns, priors), collapse(readings), "identity")
    theta = np.log([[noise, shared, 1e4, 1e4]])
    # Mean squares are printed to six digits; the slope's size away from here is tens.
    assert slope(model, evaluate(model, theta))[0, :2] == pytest.approx([0.0, 0.0], abs=2e-4)
    away = theta + np.array([[0.2, -0.2, 0.0, 0.0]])
    assert np.abs(slope(model, evaluate(model, away))[0, :2]).min() > 0.5


def weak_fit(readings, columns, noise, shared):
    priors = replace(
        flat_priors(readings.y.mean(), 1e3),
        process_sd=LogNormal(10.0 * shared, 0.01),
        curvature_sd=LogNormal(shared, 0.01),
        noise_sd=LogNormal(noise / OFF, LOG_SD),
        inside_error=LogNormal(shared * OFF, LOG_SD),
    )
    return fit_surrogate("quadratic", readings, "real", columns, priors, 1)


def quantiles(fit, name, levels):
    value = np.exp(fit.theta[:, fit.names.index(name)])
    order = np.argsort(value)
    return np.interp(levels, np.cumsum(fit.weights[order]), value[order])


@BOTH
def test_posteriors_under_weak_priors_agree_with_the_estimates(published):
    """The median lies within half a posterior sd (of the logarithm) of the published estimate."""
    readings, columns, noise, shared = published()
    fit = weak_fit(readings, columns, noise, shared)
    for name, estimate in (("noise_sd", noise), ("inside_error[0]", shared)):
        low, median, high = np.log(quantiles(fit, name, [0.16, 0.5, 0.84]))
        assert abs(median - np.log(estimate)) < 0.5 * (high - low) / 2.0
        assert low < np.log(estimate) < high


def test_the_posterior_of_the_batches_is_that_of_its_sums_of_squares():
    """The same priors times the balanced likelihood of the two mean squares, on a fine grid.

    Box & Tiao 1973, section 5.2: (n - a) ln sigma^2 + (a - 1) ln(sigma^2 + k tau^2) + SSW/sigma^2 +
    SSB/(sigma^2 + k tau^2), with a = 6 batches of k = 5 and the level integrated.
    """
    readings, columns, noise, shared = dyestuff()
    fit = weak_fit(readings, columns, noise, shared)
    steps = np.linspace(-4.0, 4.0, 801)
    ln_noise = np.log(noise) + 0.5 * steps[:, None]
    ln_shared = np.log(shared * OFF) + LOG_SD * steps[None]
    within = np.exp(2.0 * ln_noise)
    between = within + 5.0 * np.exp(2.0 * ln_shared)
    log_p = -0.5 * (24.0 * np.log(within) + 5.0 * np.log(between))
    log_p = log_p - 0.5 * (24.0 * 2451.25 / within + 5.0 * 11271.50 / between)
    log_p = log_p - 0.5 * (((ln_noise - np.log(noise / OFF)) / LOG_SD) ** 2 + steps[None] ** 2)
    p = np.exp(log_p - logsumexp(log_p))
    for name, values in (("noise_sd", ln_noise), ("inside_error[0]", ln_shared)):
        exact = (p * values).sum()
        exact_sd = np.sqrt((p * (values - exact) ** 2).sum())
        own = fit.theta[:, fit.names.index(name)]
        mean = fit.weights @ own
        sd = np.sqrt(fit.weights @ (own - mean) ** 2)
        # 50 effective nodes: plain draws would leave 0.14 sds of a mean and 10 % of an sd.
        assert mean == pytest.approx(exact, abs=0.14 * exact_sd)
        assert sd == pytest.approx(exact_sd, rel=0.15)
