"""Lack of fit where repeats agree far better than wells can: reads of one eluate, or copies."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest
from scipy.special import expit
from scipy.stats import chi2

import muntin
from muntin.surrogate.priors import LogNormal
from muntin.surrogate.pure_error import agreement
from tests.studies import RECOVERY, logit_of, written
from tests.window.planted import FACTORS, NOISE, conditions, study


def said(view) -> tuple[bool, str]:
    (check,) = (c for c in view.checks() if c.name == "lack of fit")
    return check.passed, check.sentence


def one_plate(folder, repeats_sd: float):
    """A plate whose wells scatter by 0.025 about the surface and whose repeats hardly do."""
    rng = np.random.default_rng(1)
    plate = conditions(1, 0)
    plate["recovery"] = expit(logit_of(plate)) + NOISE * rng.standard_normal(len(plate))
    first = plate.groupby(["ph", "salt"], sort=False)["recovery"].transform("first")
    plate["recovery"] = np.round(first + repeats_sd * rng.standard_normal(len(plate)), 4)
    return written(folder, [plate], factors=FACTORS, responses=[RECOVERY])


@pytest.mark.parametrize("repeats_sd", [0.0, 0.0009])
def test_repeats_that_agree_far_too_well_are_asked_about(tmp_path, repeats_sd):
    passed, sentence = said(muntin.assess(one_plate(tmp_path / "study", repeats_sd)))
    assert not passed
    assert sentence.startswith("Recovery: repeats agree suspiciously well (4 repeats of sd 0")
    assert "or reads of one eluate?" in sentence
    assert "conditions scatter" not in sentence


def test_stocks_that_are_off_are_still_told_as_such(tmp_path):
    passed, sentence = said(muntin.assess(study(tmp_path / "study", 1, "stocks")))
    assert not passed
    assert sentence.startswith("Recovery: conditions scatter about the surface more than repeats")


def model(within, count, known, prior):
    cells = SimpleNamespace(
        within=np.array(within), count=np.array(count), variance=np.array(known) ** 2
    )
    family = SimpleNamespace(priors=SimpleNamespace(noise_sd=prior))
    return SimpleNamespace(cells=cells, family=family)


def test_a_sharp_prior_makes_the_tail_that_of_chi_square():
    sharp = model([4e-4, 0.0, 1e-4], [3.0, 1.0, 2.0], [0.0, 0.0, 0.01], LogNormal(0.03, 1e-9))
    assert agreement(sharp) == pytest.approx(chi2.cdf(4e-4 / 9e-4 + 1e-4 / 1e-3, 3), rel=1e-6)
    assert agreement(model([0.0], [1.0], [0.0], LogNormal(0.03, 0.7))) == 1.0


def test_repeats_drawn_from_the_prior_agree_too_well_as_often_as_that_says():
    """The tails are uniform; 4,000 draws: standard errors of 0.005 and 0.001."""
    rng, prior = np.random.default_rng(3), LogNormal(0.03, 0.7)
    noise = prior.median * np.exp(prior.log_sd * rng.standard_normal(4000))
    within = noise**2 * rng.chisquare(4, 4000)
    tails = np.array([agreement(model([w], [5.0], [0.0], prior)) for w in within])
    assert abs(tails.mean() - 0.5) < 0.02
    assert abs((tails < 0.1).mean() - 0.1) < 0.02
    assert (tails < 0.005).mean() < 0.009
