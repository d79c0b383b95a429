"""Checks of the model against the readings."""

import re
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.special import expit
from scipy.stats import binom

import muntin
from muntin.window.checks.coverage import coverage
from muntin.window.checks.integration import integration
from muntin.window.checks.wild_wells import wild_rows
from tests.studies import (
    HCP,
    PH,
    RECOVERY,
    SALT,
    SHIFT,
    logit_of,
    read,
    read_hcp,
    read_shift,
    spread,
    written,
)

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
        " of 24 readings lie in the 90 % range predicted from the others (17 or more expected)."
    )
    assert found["integration"].sentence.startswith(
        "Recovery: probabilities average over enough model settings (effective nodes "
    )
    assert view.window().unsupported == ()


# Readings that scatter by 0.06 where the study is sure that they scatter by 0.01.
NARROW = ": predictions are too sure; read more conditions, or state errors that wells share"
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
        f"({least} or more expected){NARROW}."
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


@pytest.mark.parametrize(("sds", "pit", "wild"), [(4.0, 0.999, 0), (3.0, 1.0, 0), (4.0, 1.0, 1)])
def test_a_wild_well_is_far_and_unlikely(sound_view, sds, pit, wild):
    response, stack = sound_view.study.definition.responses[0], sound_view.stacks["recovery"]
    (fit,) = stack.fits
    y = sound_view.study.readings("recovery")["y"].to_numpy(dtype=float)
    mean, transform = y.copy(), np.full(24, 0.5)
    mean[5] -= sds * fit.loo.sd[5]
    transform[5] = pit
    odd = replace(stack, fits=(replace(fit, loo=replace(fit.loo, mean=mean, pit=transform)),))
    assert list(wild_rows(sound_view, response, odd)) == [5] * wild


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
        (1, False, ", which one plate cannot tell; until there are 3 it rests on the prior."),
        (2, False, ", which two of them hardly tell; until there are 3 it rests on the prior."),
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
    verdict, advice = "average over enough", "."
    if not passed:
        verdict, advice = (
            "rest on too few",
            "; add readings, narrow the priors, or use --engine nuts.",
        )
    said = f"Recovery: probabilities {verdict} model settings ({shown}){advice}"
    assert check.sentence == said
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


def test_readings_far_closer_than_predicted_are_a_note(tmp_path):
    """Readings without noise where the study is sure that they scatter by 0.06."""
    sure = {"noise_sd": {"median": 0.06, "log_sd": 0.05}}
    exact = [p.assign(recovery=expit(logit_of(p)).round(4)) for p in SOUND]
    found, view = checks(tmp_path, exact, responses=[{**RECOVERY, "priors": sure}])
    coverage = found["coverage"]
    assert not coverage.passed
    assert not coverage.serious
    assert coverage.sentence == (
        "Recovery: 24 of 24 readings lie in the 90 % range predicted from the others (17 or more "
        "expected); they lie closer than predicted, so the window may be larger than shown."
    )
    assert coverage.sentence not in view.window().unsupported


@pytest.mark.parametrize(
    ("pit", "serious", "said"),
    [
        (np.linspace(0.0, 1.0, 42)[1:-1], True, ""),
        (np.linspace(0.0, 1.0, 42)[1:-1] ** 0.4, True, "; most lie above what is predicted"),
        (
            np.linspace(0.0, 1.0, 42)[1:-1] ** 2.5,
            True,
            f"{NARROW}; most lie below what is predicted",
        ),
        (
            np.r_[np.full(14, 0.06), np.full(14, 0.94), np.full(14, 0.5)],
            True,
            f"; too many lie far out{NARROW}",
        ),
        (np.full(7, 0.5), True, ""),
        (
            np.full(20, 0.5),
            False,
            "; they lie closer than predicted, so the window may be larger than shown",
        ),
    ],
)
def test_transforms_that_lie_unevenly_are_told(sound_view, pit, serious, said):
    response, stack = sound_view.study.definition.responses[0], sound_view.stacks["recovery"]
    (fit,) = stack.fits
    odd = replace(stack, fits=(replace(fit, loo=replace(fit.loo, pit=pit)),))
    (check,) = coverage(response, odd, odd)
    assert check.sentence.endswith(f" or more expected){said}.")
    assert check.passed == (not said)
    assert check.serious == serious


@pytest.fixture(scope="module")
def sound_view(tmp_path_factory):
    return muntin.assess(written(tmp_path_factory.mktemp("sound"), SOUND), "quadratic")


def test_repeats_that_are_too_few_are_said(tmp_path):
    found, _ = checks(tmp_path, SOUND, "quadratic")
    assert found["lack of fit"].passed
    assert not found["lack of fit"].told
    assert found["lack of fit"].sentence == (
        "Recovery: too few repeats to tell lack of fit from noise (no repeat; 3 are enough)."
    )


def test_sizes_of_scatter_are_told_in_the_unit_of_the_readings(tmp_path):
    """Repeats 0.02 apart, which have a sd of 0.02 / sqrt(2) each; in per cent 1.4."""
    plates = []
    for plate in SOUND:
        again = plate.iloc[:4].assign(recovery=plate["recovery"].iloc[:4] + 0.02)
        both = pd.concat([plate, again], ignore_index=True)
        plates.append(both.assign(recovery=(100.0 * both["recovery"]).round(2)))
    response = {**RECOVERY, "unit": "%", "at_least": 80}
    found, _ = checks(tmp_path, plates, "quadratic", responses=[response])
    said = found["lack of fit"].sentence
    start = "Recovery: conditions do not clearly scatter about the surface by more than repeats do"
    assert said.startswith(start)
    assert said.endswith("; 8 repeats 1.4 %).")


def test_the_better_surrogate_is_told_with_its_error(sound_view, tmp_path):
    view = muntin.assess(written(tmp_path / "study", SOUND), "stacked")
    stack = view.stacks["recovery"]
    each = stack.fits[0].loo.log_density - stack.fits[1].loo.log_density
    (check,) = (c for c in view.checks() if c.name == "gp against quadratic")
    assert check.passed
    assert not check.serious
    # Vehtari, Gelman & Gabry 2017, eq. 24.
    error = np.sqrt(((each - each.mean()) ** 2).sum())
    assert f"(log density {abs(each.sum()):.1f} ± {error:.1f} higher)" in check.sentence
    titles = ["the Gaussian process", "the quadratic"]
    if each.sum() < 0:
        titles.reverse()
    how = "better than" if abs(each.sum()) > 2.0 * error else "about as well as"
    said = f"Recovery: {titles[0]} predicts readings {how} {titles[1]} ("
    assert check.sentence.startswith(said)
    assert "gp against quadratic" not in {c.name for c in sound_view.checks()}


def test_shared_errors_are_told_by_their_posterior(sound_view):
    """Median and 90 % range of the sd over the nodes: so much weight lies below, to a node's and to
    the two digits shown.
    """
    (check,) = (c for c in sound_view.checks() if c.name == "shared errors")
    (fit,) = sound_view.stacks["recovery"].fits
    sd = np.exp(fit.theta[:, fit.names.index("scale_error[0]")])
    shown = re.findall(r"[\d.]+(?= %| to)", check.sentence.split("error of")[1])
    middle, _, low, high = (float(x) / 100.0 for x in shown)
    for value, level in ((low, 0.05), (middle, 0.5), (high, 0.95)):
        digit = 10.0 ** (np.floor(np.log10(value)) - 1.0)
        least, most = (fit.weights[sd < value + half * digit].sum() for half in (-0.5, 0.5))
        assert least - fit.weights.max() <= level <= most + fit.weights.max()
    assert low < middle < high


def test_no_shared_errors_no_check(tmp_path):
    shared = [{"by": ["plate"], "acts": "inside", "responses": ["hcp"]}]
    plates = [read_hcp(plate) for plate in SOUND]
    given = {"responses": [RECOVERY, HCP], "shared_errors": shared}
    view = muntin.assess(written(tmp_path / "study", plates, **given), "quadratic")
    assert [c.response for c in view.checks() if c.name == "shared errors"] == ["hcp"]


@pytest.mark.parametrize(
    ("response", "reader", "unit"),
    [(HCP, read_hcp, " %"), (SHIFT, read_shift, ""), ({**SHIFT, "unit": "mV"}, read_shift, " mV")],
)
def test_shared_errors_have_the_unit_of_their_response(tmp_path, response, reader, unit):
    plates = [reader(plate, seed) for seed, plate in enumerate(SOUND)]
    found, _ = checks(tmp_path, plates, "quadratic", responses=[response])
    said = rf" share an error of [\d.]+{unit} \(90 % range [\d.]+ to [\d.]+{unit}\)"
    assert re.search(said, found["shared errors"].sentence)


def test_of_two_plates_either_may_be_off(tmp_path):
    low = SOUND[1].assign(recovery=(0.6 * SOUND[1]["recovery"]).round(4))
    again = SOUND[0].iloc[:6].assign(recovery=(0.6 * SOUND[0]["recovery"].iloc[:6]).round(4))
    found, view = checks(
        tmp_path, [SOUND[0], pd.concat([low, again], ignore_index=True)], "quadratic"
    )
    check = found["other plates"]
    assert not check.passed
    assert re.match(
        r"Recovery: plate-02 reads (39|4\d) % less than the other plate predicts, more than shared "
        r"errors explain \(of two plates either may be off\); look at their load, ",
        check.sentence,
    )
    assert check.sentence in view.window().unsupported


def test_one_plate_has_no_other_plates(tmp_path):
    found, _ = checks(tmp_path, SOUND[:1], "quadratic")
    assert "other plates" not in found


def test_scale_of_priors_is_told_by_the_window(sound_view):
    (check,) = (c for c in sound_view.checks() if c.name == "priors")
    assert check.passed
    assert re.fullmatch(
        "Recovery: the readings do not contradict the priors; a quarter more or less weight on "
        r"them moves the window by (under 1|\d) % of the range\.",
        check.sentence,
    )


def test_a_response_that_is_not_judged_has_no_window_to_move(tmp_path):
    tracked = {key: value for key, value in RECOVERY.items() if key != "at_least"}
    responses = [{**HCP}, tracked]
    plates = [read_hcp(plate) for plate in SOUND]
    study = written(tmp_path / "study", plates, responses=responses)
    said = {c.response: c.sentence for c in muntin.assess(study).checks() if c.name == "priors"}
    assert said["recovery"] == "Recovery: the readings do not contradict the priors."
    assert "moves the window by" in said["hcp"]
