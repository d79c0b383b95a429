"""The reference engine on small studies: agreement with the fast one, and what it reports."""

import sys
from dataclasses import replace

import numpy as np
import pytest

from muntin.record.faults import StudyFaults
from muntin.surrogate.convergence import Sampling
from muntin.surrogate.fit import fit_stack
from muntin.surrogate.nuts import Nuts, resampled, sample
from muntin.window.probability import Target, mean_meets, well_meets
from tests.surrogate.problems import CODING, COLUMNS, priors, readings

SETTINGS = Nuts(draws=1000, tune=500, nodes=4000)
GRID = CODING.code([np.tile(np.linspace(4.0, 7.0, 13), 3), np.repeat([0, 1, 2], 13)])


@pytest.fixture(scope="module")
def fits():
    """The fast fit of 23 readings of a fraction by the quadratic, and the same from draws."""
    data = readings(1, n=23, inside=(), scale=(3,))
    fast = fit_stack(["quadratic"], data, "fraction", COLUMNS, priors(), 1).fits[0]
    return fast, resampled(fast, 1, SETTINGS)


def test_the_engines_agree(fits):
    """Budget: 0.005 on average, 0.03 at most. 4,000 draws, near to independent, have an error of at
    most 0.008 at a place and of about 0.002 on average.
    """
    fast, nuts = (fit.surface for fit in fits)
    for meets, most in ((mean_meets, 0.03), (well_meets, 0.03)):
        a, b = (meets(s, s.moments(GRID), Target(low=0.8)) for s in (fast, nuts))
        assert np.ptp(a) > 0.5
        assert np.abs(a - b).mean() < 0.005
        assert np.abs(a - b).max() < most


def test_the_sampling_is_judged_good(fits):
    sampling = fits[1].sampling
    assert sampling.passed, sampling.sentence
    assert (sampling.chains, sampling.draws) == (4, 1000)
    assert sampling.sentence.startswith("4 chains of 1000 draws agree (R-hat 1.0")
    assert fits[0].sampling is None
    assert fits[0].draws is None


def test_predictions_agree_where_their_weights_can_be_relied_on(fits):
    fast, nuts = fits
    good = nuts.sampling.pareto_k < 0.5
    assert good.sum() > 8
    difference = (nuts.loo.log_density - fast.loo.log_density)[good]
    assert np.abs(difference).mean() < 0.05


@pytest.mark.slow
def test_draws_of_a_seed_come_again(fits):
    fast, nuts = fits
    again = resampled(fast, 1, SETTINGS)
    assert np.array_equal(again.draws.eta, nuts.draws.eta)
    assert np.array_equal(again.surface.parts[0].mean, nuts.surface.parts[0].mean)


def test_nodes_are_thinned_evenly(fits):
    draws = fits[1].draws
    few = draws.surface("logit", 400, 1)
    assert few.weights == pytest.approx(np.full(400, 1.0 / 400))
    p = [mean_meets(s, s.moments(GRID), Target(low=0.8)) for s in (few, fits[1].surface)]
    assert np.abs(p[0] - p[1]).max() < 0.1
    assert few.parts[0].errors.noise[-1] == np.exp(draws.theta[-1, 0])


def test_student_nodes_together_have_student_noise(fits):
    """Given degrees of freedom of 5: the share of readings beyond 2 and 4 noise sds."""
    from scipy.stats import norm, t

    draws = fits[1].draws
    chains = draws.eta.shape[:2]
    wild = replace(draws, nu=np.full(chains, 5.0), eta=np.zeros_like(draws.eta))
    noise = wild.surface("logit", 4000, 3).errors.noise
    sd = draws.model.layout.noise(draws.model.layout.theta(np.zeros((1, draws.eta.shape[2]))))[0]
    for limit in (2.0, 4.0):
        # 4 errors of the average over 4,000 mixing variables.
        beyond = norm.sf(limit * sd / noise)
        error = 4.0 * beyond.std() / np.sqrt(len(noise))
        assert beyond.mean() == pytest.approx(t.sf(limit, 5.0), abs=error)


def test_data_for_arviz(fits):
    from muntin.surrogate.inference_data import inference_data

    nuts = fits[1]
    data = inference_data(nuts.draws)
    cells, layout = nuts.model.cells, nuts.model.layout
    assert data.posterior["latent"].shape == (4, 1000, len(cells.X))
    noise = data.posterior["noise_sd"].to_numpy().ravel()
    assert noise == pytest.approx(layout.noise(nuts.theta))
    scale = data.posterior["scale_error"].to_numpy().reshape(-1, 1)
    assert scale == pytest.approx(layout.scale_sd(nuts.theta))
    assert data.log_likelihood["reading"].shape == (4, 1000, len(cells.y))
    assert data.observed_data["reading"].to_numpy() == pytest.approx(cells.y)
    assert data.sample_stats["diverging"].shape == (4, 1000)


def judged(**changes):
    good = Sampling("nutpie", 4, 1000, 1.002, 900.0, 800.0, 2000.0, 0.0, np.array([0.1, 0.8]))
    return replace(good, **changes)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"r_hat": 1.02}, "the chains disagree (R-hat 1.020, at most 1.01)"),
        ({"r_hat": np.nan}, "the chains disagree (R-hat nan, at most 1.01)"),
        (
            {"tail": 399.0},
            "too few effective draws (900 in the bulk, 399 in the tails, at least 400)",
        ),
        ({"divergent": 0.0025}, "0.25 % of the draws diverged"),
    ],
)
def test_a_failed_sampling_says_why(changes, words):
    sampling = judged(**changes)
    assert not sampling.passed
    assert sampling.sentence == f"4 chains of 1000 draws cannot be relied on: {words}"


def test_a_good_sampling_passes_and_counts_heavy_weights():
    sampling = judged()
    assert sampling.passed
    assert sampling.unreliable == 1


def test_a_missing_library_is_said_with_what_to_install(fits, monkeypatch):
    monkeypatch.setitem(sys.modules, "pymc", None)
    with pytest.raises(ImportError, match=r"pip install 'muntin\[nuts\]'"):
        sample(fits[0].model, 1, SETTINGS)
    from muntin.window.engine import settings_of

    with pytest.raises(StudyFaults, match=r"^engine: the engine nuts needs PyMC"):
        settings_of("nuts", progress=False)


@pytest.mark.slow
def test_pymcs_own_sampler_finds_the_same(fits):
    fast, nuts = fits
    own = resampled(fast, 2, replace(SETTINGS, own=True, draws=500))
    assert (own.sampling.sampler, nuts.sampling.sampler) == ("PyMC", "nutpie")
    assert own.sampling.passed, own.sampling.sentence
    a, b = (mean_meets(f.surface, f.surface.moments(GRID), Target(low=0.8)) for f in (own, nuts))
    assert np.abs(a - b).max() < 0.05
    assert np.abs(a - b).mean() < 0.01


@pytest.mark.slow
@pytest.mark.parametrize("name", ["gp", "quadratic"])
def test_student_noise_is_pulled_less_by_a_wild_well(name):
    """A reading of 0.2 where the others say 0.95: its leave-one-in mean stays with the others."""
    data = readings(1, n=23, inside=(), scale=(3,))
    wild = int(data.y.argmax())
    wrong = replace(data, y=np.where(np.arange(23) == wild, 0.2, data.y))
    at = data.X[[wild]]
    target = Target(low=0.8)
    p = []
    for y, noise in ((data, "normal"), (wrong, "normal"), (wrong, "student")):
        fast = fit_stack([name], y, "fraction", COLUMNS, priors(), 1).fits[0]
        surface = resampled(fast, 1, replace(SETTINGS, noise=noise)).surface
        p.append(mean_meets(surface, surface.moments(at), target)[0])
    assert p[0] - p[2] < 0.5 * (p[0] - p[1])
