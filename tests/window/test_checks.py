"""Checks of the model against the readings."""

import re
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.stats import binom

import muntin
from muntin.window.checks.integration import integration
from tests.studies import HCP, PH, RECOVERY, SALT, read, read_hcp, spread, written

FACTORS = [PH, SALT]
SOUND = [read(spread(FACTORS, 12, seed), seed, error) for seed, error in ((1, 0.02), (2, -0.03))]


def checks(folder, plates, surrogate="gp", **given):
    view = muntin.assess(written(folder / "study", plates, **given), surrogate)
    return {check.name: check for check in view.checks()}, view


@pytest.mark.parametrize("surrogate", ["gp", "quadratic", "stacked"])
def test_sound_readings_pass(tmp_path, surrogate):
    found, view = checks(tmp_path, SOUND, surrogate)
    assert list(found) == [
        "coverage",
        "other plates",
        "lack of fit",
        "wild wells",
        "priors",
        "integration",
        "shared errors",
        *(["gp against quadratic"] if surrogate == "stacked" else []),
        "confounding",
    ]
    assert [name for name, check in found.items() if not check.passed] == ["shared errors"]
    assert found["wild wells"].sentence == "Recovery: no wild wells."
    assert found["coverage"].sentence.endswith(
        " of 24 readings lie in the 90 % range predicted from the others "
        "(17 or more were to be expected)."
    )
    assert found["integration"].sentence.startswith(
        "Recovery: averages over hyperparameters are reliable (effective nodes "
    )
    assert view.window().unsupported == ()


# Readings that scatter by 0.06 where the study is sure that they scatter by 0.01.
SURE = {
    "noise_sd": {"median": 0.01, "log_sd": 0.1},
    "length_scale": {"median": 4.0, "log_sd": 0.1},
    "scale_error": {"median": 0.01, "log_sd": 0.1},
}


def scattered(plate, seed):
    noise = 0.06 * np.random.default_rng(seed).standard_normal(len(plate))
    return plate.assign(recovery=(plate["recovery"] + noise).round(4))


def test_readings_that_contradict_the_model_fail_coverage(tmp_path):
    plates = [scattered(plate, seed) for seed, plate in enumerate(SOUND)]
    found, view = checks(tmp_path, plates, responses=[{**RECOVERY, "priors": SURE}])
    coverage = found["coverage"]
    assert not coverage.passed
    assert coverage.serious
    hits = int(coverage.sentence.split()[1])
    least = int(binom.ppf(0.005, 24, 0.9))
    assert hits < least
    assert coverage.sentence == (
        f"Recovery: {hits} of 24 readings lie in the 90 % range predicted from the others "
        f"(too few: {least} or more were to be expected)."
    )
    assert coverage.sentence in view.window().unsupported


def test_the_same_readings_pass_where_the_study_does_not_claim_to_know(tmp_path):
    plates = [scattered(plate, seed) for seed, plate in enumerate(SOUND)]
    found, view = checks(tmp_path, plates)
    assert found["coverage"].passed
    assert view.window().unsupported == ()


def with_wild_well():
    """The sound plates with one well of plate 1 that reads 0.85 where 0.45 was to be expected."""
    wild = SOUND[0].assign(well=[f"C{i + 1}" for i in range(12)])
    row = int(np.argmin(np.abs(wild["recovery"] - 0.45)))
    wild.loc[row, "recovery"] = 0.85
    return [wild, SOUND[1]], row


@pytest.mark.parametrize("surrogate", ["gp", "stacked"])
def test_a_wild_well_is_named_and_kept(tmp_path, surrogate):
    plates, row = with_wild_well()
    found, view = checks(tmp_path, plates, surrogate)
    check = found["wild wells"]
    assert not check.passed
    assert not check.serious
    change = r"\(without it the window would be \d+ % of the range instead of \d+ %\)"
    assert re.fullmatch(
        f"Recovery: far from what the others predict: plate-01 C{row + 1} {change}; look for a "
        "cause, and exclude only with one.",
        check.sentence,
    )
    assert len(view.study.readings("recovery")) == 24


def test_a_wild_well_that_is_excluded_is_gone(tmp_path):
    (wild, other), row = with_wild_well()
    wild["exclude"] = ["the filter leaked" if i == row else "" for i in range(12)]
    found, _ = checks(tmp_path, [wild, other])
    assert found["wild wells"].passed
    assert " of 23 readings " in found["coverage"].sentence


def test_a_wild_well_of_a_positive_response_may_lie_near_nothing(tmp_path):
    # A thousandth of what its neighbours read: far away in ratios, hardly in ng/mL.
    plates = [read_hcp(plate) for plate in SOUND]
    least = int(np.argmin(plates[0]["hcp"]))
    plates[0].loc[least, "hcp"] /= 1000.0
    found, _ = checks(tmp_path, plates, responses=[HCP])
    said = f"hcp: far from what the others predict: plate-01 A{least + 1} (without it the "
    assert found["wild wells"].sentence.startswith(said)


def test_every_response_with_readings_is_checked(tmp_path):
    plates = [read_hcp(plate) for plate in SOUND]
    responses = [RECOVERY, {**HCP, "label": "HCP"}, {"name": "purity", "kind": "fraction"}]
    study = written(tmp_path / "study", [p.assign(purity="") for p in plates], responses=responses)
    view = muntin.assess(study, "quadratic")
    found = view.checks()
    names = [check.name for check in found if check.response == "recovery"]
    assert names == [check.name for check in found if check.response == "hcp"]
    of_all = [check.name for check in found if check.response is None]
    assert of_all == ["readings together", "confounding"]
    assert len(found) == 2 * len(names) + len(of_all)
    labels = {check.sentence.split(":")[0] for check in found if check.response == "hcp"}
    assert labels == {"HCP"}


@pytest.mark.parametrize(
    ("count", "passed", "sentence"),
    [
        (1, False, ", which one plate cannot tell; the prior speaks for p_well there."),
        (2, False, ", which two of them hardly tell; the prior speaks for p_well there."),
        (3, True, " %)."),
    ],
)
def test_few_plates(tmp_path, count, passed, sentence):
    plates = [read(spread(FACTORS, 8, seed), seed) for seed in range(count)]
    found, view = checks(tmp_path, plates, "quadratic")
    check = found["shared errors"]
    assert check.passed == passed
    start = "Recovery: wells that share a plate share an error of "
    assert re.fullmatch(start + r"[\d.]+ % \(90 % range [\d.]+ to [\d.]+ %\).*", check.sentence)
    assert check.sentence.endswith(sentence)
    assert not check.serious
    assert check.sentence not in view.window().unsupported


@pytest.mark.parametrize(
    ("ess", "k_hat", "passed", "shown"),
    [
        (20.0, 0.69, True, "effective nodes 20, Pareto k 0.69"),
        (19.9, 0.1, False, "effective nodes 20, Pareto k 0.10"),
        (63.0, 0.7, False, "effective nodes 63, Pareto k 0.70"),
        (64.0, 0.7, True, "effective nodes 64, Pareto k 0.70"),
        (64.0, -0.3, True, "effective nodes 64, Pareto k 0.00"),
    ],
)
def test_averages_rest_on_enough_nodes(tmp_path, ess, k_hat, passed, shown):
    # The worst of the fits counts.
    study = written(tmp_path / "study", SOUND)
    view = muntin.assess(study, "stacked")
    stack = view.stacks["recovery"]
    good, other = (replace(fit, ess=64.0, k_hat=-0.5) for fit in stack.fits)
    poor = replace(stack, fits=(good, replace(other, ess=ess, k_hat=k_hat)))
    (check,) = integration(study.definition.responses[0], poor)
    verdict = "reliable" if passed else "unreliable: add readings or narrow the priors"
    assert check.sentence == f"Recovery: averages over hyperparameters are {verdict} ({shown})."
    assert check.passed == passed
    assert check.serious


def test_nothing_read_needs_no_checks(tmp_path):
    found, view = checks(tmp_path, [])
    assert found == {}
    assert view.window().unsupported == ()


def test_a_void_plate_does_not_count(tmp_path):
    folder = tmp_path / "study"
    (folder / "plates").mkdir(parents=True)
    (folder / "plates" / "plate-02.toml").write_text('void = "the feed was warm"\n')
    found, _ = checks(tmp_path, [*SOUND, pd.concat(SOUND, ignore_index=True)], "quadratic")
    assert "two of them hardly tell" in found["shared errors"].sentence
