"""What readings of a plateau tell of the ceiling, and what becomes of a target above it."""

from dataclasses import dataclass, replace
from functools import cache

import numpy as np
import pytest
from scipy.stats.qmc import Sobol

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Columns
from muntin.surrogate.fit import Fit, fit_surrogate
from muntin.surrogate.hyperparameters import integrate
from muntin.surrogate.priors import LogNormal, priors_of
from muntin.window.probability import Target, mean_meets

NAMES = pytest.mark.parametrize("name", ["gp", "quadratic"])
# Of the 24 wells of each of these, 6 or 7 lie within 0.03 of the plateau.
SEEDS = pytest.mark.parametrize("seed", [1, pytest.param(2, marks=pytest.mark.slow)])
PLATEAU = np.array([[1.0, 1.0], [0.8, 1.0], [1.0, 0.5]])
PRIORS = priors_of("fraction", (0.0, 1.0))
NO_GAP = replace(PRIORS, ceiling_gap=LogNormal(1e-6, 1e-3))


@dataclass(frozen=True)
class Known:
    """A fit, and the mean and sd of its posterior of the ceiling."""

    fit: Fit
    mean: float
    sd: float

    def below(self, value):
        return self.fit.weights @ (ceilings(self.fit) < value)

    def chances(self, low):
        """p_mean (3,) on the plateau."""
        surface = self.fit.surface
        return mean_meets(surface, surface.latent(PLATEAU), Target(low=low))


def ceilings(fit):
    return 1.0 - np.exp(fit.theta[:, fit.names.index("ceiling_gap")])


@cache
def known(name, seed, top, plates=True, priors=PRIORS, nodes=1):
    """Two plates of twelve wells each, without plate errors, that level off at `top`; noise 0.02.

    plates: the model allows for plate errors. nodes: seed of the nodes.
    """
    rng = np.random.default_rng(seed)
    X = 2.0 * Sobol(2, rng=rng).random_base2(5)[:24] - 1.0
    f = 2.0 + 3.0 * X[:, 0] + 1.5 * X[:, 1]
    y = top / (1.0 + np.exp(-f)) + 0.02 * rng.normal(size=24)
    scale = (np.arange(24) // 12,) if plates else ()
    data = Readings(X=X, y=y, sd=np.zeros(24), scale=scale)
    fit = fit_surrogate(name, data, "fraction", Columns.plain(2), priors, nodes)
    c = ceilings(fit)
    mean = fit.weights @ c
    return Known(fit, mean, np.sqrt(fit.weights @ (c - mean) ** 2))


@NAMES
@SEEDS
@pytest.mark.parametrize("plates", [False, True])
def test_a_plateau_below_one_is_seen(name, seed, plates):
    """Its six wells leave an sd of 0.02 / sqrt(6) = 0.008 at least; not to know where the curve
    levels off, and the errors of two plates, leave more. Whatever the readings leave, four times
    as many nodes of another seed leave, too.
    """
    seen = known(name, seed, 0.92, plates)
    assert seen.sd > 0.008
    assert abs(seen.mean - 0.92) < 1.5 * seen.sd
    assert seen.below(0.97) > 0.8
    posterior = integrate(seen.fit.model, 5, 512)
    w = np.exp(posterior.log_weights)
    gap = seen.fit.names.index("ceiling_gap")
    c = 1.0 - np.exp(posterior.evidence.theta[:, gap])
    mean = w @ c
    assert seen.mean == pytest.approx(mean, abs=0.25 * seen.sd)
    assert seen.sd == pytest.approx(np.sqrt(w @ (c - mean) ** 2), rel=0.15)


@NAMES
@SEEDS
def test_a_target_above_the_plateau_is_not_met_there(name, seed):
    """0.95 lies 2 to 3 sds above the ceiling without plate errors, 1 to 2 with them, and the curve
    must be near its ceiling, too. Seen: at most 0.0025 without, 0.09 with plate errors; a curve
    that can only end at 1 says more, 0.07 to 0.34, on the mean of five sets of nodes.
    """
    assert known(name, seed, 0.92, plates=False).chances(0.95).max() < 0.005
    assert known(name, seed, 0.92).chances(0.95).max() < 0.1
    endless, ending = (
        np.mean([known(name, seed, 0.92, priors=p, nodes=n).chances(0.95) for n in range(1, 6)])
        for p in (NO_GAP, PRIORS)
    )
    assert endless > ending
    assert known(name, seed, 0.92).chances(0.8).min() > 0.99


@NAMES
@SEEDS
def test_a_plateau_of_one_leaves_the_ceiling_there(name, seed):
    """Noise and plate errors leave 0.016, so that 0.97 lies 2 sds below, and the prior has half of
    its mass above 0.97: in all 0.5 * 0.05 / (0.5 * 0.05 + 0.5) = 0.05 is left below. Seen: means of
    0.985, 0.04 to 0.06 below 0.97, and p_mean of 0.97 to 0.99 at a target of 0.95.
    """
    seen = known(name, seed, 1.0)
    assert seen.mean > 0.98
    assert seen.below(0.97) < 0.075
    assert seen.chances(0.95).min() > 0.96


@NAMES
def test_wells_far_from_a_plateau_leave_the_prior_of_the_ceiling(name):
    """Six wells near 0.1, where a gap of 0.03 is a shift of 0.03 logits; good to the error of as
    many plain draws as there are effective nodes.
    """
    x = np.linspace(-1.0, 1.0, 6)
    data = Readings(X=x[:, None], y=0.1 + 0.03 * x, sd=np.zeros(6))
    fit = fit_surrogate(name, data, "fraction", Columns.plain(1), PRIORS, 1)
    law = PRIORS.ceiling_gap
    eta = (np.log(1.0 - ceilings(fit)) - np.log(law.median)) / law.log_sd
    assert fit.weights @ eta == pytest.approx(0.0, abs=1.0 / np.sqrt(fit.ess))
    assert fit.weights @ eta**2 == pytest.approx(1.0, abs=np.sqrt(2.0 / fit.ess))
