"""What is predicted of column runs, against what the same posterior says otherwise."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

import muntin
from muntin.confirmation.prediction import LEVELS, error_sds, predictions, reading_quantile
from muntin.surrogate.links import mean_of
from muntin.window.coded import code, setting_sd
from muntin.window.predicted import Predicted
from muntin.window.probability import Target
from tests.studies import (
    HCP,
    PH,
    RECOVERY,
    SALT,
    SHIFT,
    read,
    read_hcp,
    read_shift,
    spread,
    written,
)

RUNS = pd.DataFrame({"ph": [6.5, 5.5, 7.0], "salt": [300.0, 350.0, 100.0]})
DRAWS = 200_000


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    factors = [{**PH, "set_sd": 0.05}, SALT]
    plates = [
        read_shift(read_hcp(read(spread(factors, 14, seed), seed, error), seed), seed)
        for seed, error in ((1, 0.03), (2, -0.03))
    ]
    given = {"factors": factors, "responses": [RECOVERY, HCP, SHIFT]}
    study = written(tmp_path_factory.mktemp("study"), plates, **given)
    return muntin.assess(study, surrogate="quadratic")


def predicted(view, name: str) -> Predicted:
    definition, surface = view.study.definition, view.surfaces[name]
    X = code(definition, RUNS)
    return Predicted.of(surface, X, Target(), setting_sd(definition, RUNS))


def test_means_and_intervals_are_those_of_the_assessment(view) -> None:
    at = view.at(RUNS)
    for one in predictions(view, RUNS, seed=1):
        for own, column in (("mean", "mean"), ("mean_low", "low"), ("mean_high", "high")):
            expected = at[f"{one.response}_{column}"].to_numpy()
            assert np.array(getattr(one, own)) == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize("name", ["recovery", "hcp", "shift"])
def test_a_reading_lies_below_its_quantile_as_often_as_it_should(view, name: str) -> None:
    own = predicted(view, name)
    for level in LEVELS:
        limits = reading_quantile(own, level)
        for i, limit in enumerate(limits):
            below = own.at(np.array([i])).met(Target(high=float(limit)))
            assert below == pytest.approx(level, abs=1e-5)


@pytest.mark.parametrize("name", ["recovery", "hcp", "shift"])
def test_quantiles_and_spread_against_draws_of_readings(view, name: str) -> None:
    # Monte Carlo error of a tail of 0.025 over 200,000 draws: 0.0004.
    surface, rng = view.surfaces[name], np.random.default_rng(7)
    own = predicted(view, name)
    one = next(p for p in predictions(view, RUNS, seed=1) if p.response == name)
    picked = rng.choice(len(surface.weights), DRAWS, p=surface.weights / surface.weights.sum())
    mean, variance = own.moments[0][picked], own.moments[1][picked]
    errors, z = surface.errors, rng.standard_normal
    f = mean + np.sqrt(variance) * z(mean.shape) + np.sqrt(own.wander[picked]) * z(mean.shape)
    for sd in errors.inside[picked].T:
        f += sd[:, None] * z((DRAWS, 1))
    noise = errors.noise[picked][:, None] * z(mean.shape)
    if name == "recovery":
        scale = 1.0 + sum(sd * z(DRAWS) for sd in errors.scale[picked].T)
        y = scale[:, None] * mean_of("logit", f, errors.ceiling[picked][:, None]) + noise
    else:
        y = mean_of(surface.link, f + noise)
    low, high = np.array(one.reading_low), np.array(one.reading_high)
    # The latent law has a skewness and a cloud, which these draws leave out.
    assert (y < low).mean(axis=0) == pytest.approx(0.025, abs=0.008)
    assert (y > high).mean(axis=0) == pytest.approx(0.025, abs=0.008)


@pytest.mark.parametrize("name", ["recovery", "hcp", "shift"])
def test_parts_of_the_spread_make_the_whole(view, name: str) -> None:
    """Process mean, own errors and plate errors together make the spread of a reading."""
    one = next(p for p in predictions(view, RUNS, seed=1) if p.response == name)
    parts = np.diag(one.covariance) + np.square(one.own_sd) + np.square(one.plate_sd)
    low, high = np.array(one.reading_low), np.array(one.reading_high)
    width = np.log(high / low) if one.logarithm else high - low
    assert np.sqrt(parts) == pytest.approx(width / 3.92, rel=0.12)
    assert one.logarithm == (name == "hcp")


def test_the_covariance_is_sound_and_the_same_seed_gives_the_same(view) -> None:
    first, second, other = (predictions(view, RUNS, seed) for seed in (1, 1, 2))
    assert first == second
    assert first != other
    for one in first:
        C = np.array(one.covariance)
        assert pytest.approx(C.T) == C
        assert np.linalg.eigvalsh(C).min() > 0.0


def test_errors_of_a_real_response_are_those_of_the_nodes(view) -> None:
    own, plate = error_sds(predicted(view, "shift"))
    surface = view.surfaces["shift"]
    wander = predicted(view, "shift").wander
    noise = surface.weights @ surface.errors.noise**2
    assert own**2 == pytest.approx(noise + surface.weights @ wander)
    assert plate**2 == pytest.approx(surface.weights @ (surface.errors.inside**2).sum(1))
