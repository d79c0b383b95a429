"""How the readings of one well go together: planted correlations, few wells, other wells."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import binom

import muntin
from muntin.window import residuals
from muntin.window.checks.together import readings_together
from muntin.window.residuals import Together, correlation_matrix, residual_correlations
from tests.studies import HCP, PH, RECOVERY, SALT, logit_of, spread, written

PURITY = {"name": "purity", "label": "Purity", "kind": "fraction", "at_least": 0.75}
FACTORS = [PH, SALT]


def plate(seed, rho, count=24, hcp=False):
    """Recovery and another response with noise of correlation rho; all invented."""
    rng = np.random.default_rng(seed)
    conditions = spread(FACTORS, count, seed)
    noise = rng.multivariate_normal([0.0, 0.0], [[1.0, rho], [rho, 1.0]], count).T
    f, salt = logit_of(conditions), conditions["salt"].to_numpy(dtype=float)
    recovery = 0.97 / (1.0 + np.exp(-f)) + 0.02 * noise[0]
    frame = conditions.assign(recovery=recovery.round(5))
    if hcp:
        return frame.assign(hcp=np.exp(3.0 + 0.006 * (salt - 250.0) + 0.1 * noise[1]).round(5))
    purity = 0.95 / (1.0 + np.exp(-1.5 + 0.008 * (salt - 250.0))) + 0.02 * noise[1]
    return frame.assign(purity=purity.round(5))


def view_of(folder, plates, responses, **given):
    study = written(folder / "study", plates, responses=responses, **given)
    return muntin.assess(study, "quadratic")


@pytest.mark.parametrize(("rho", "hcp"), [(0.8, False), (-0.8, False), (-0.8, True), (0.0, True)])
def test_a_planted_correlation_is_found(tmp_path, rho, hcp):
    plates = [plate(seed, rho, hcp=hcp) for seed in (1, 2)]
    view = view_of(tmp_path, plates, [RECOVERY, HCP if hcp else PURITY])
    (pair,) = view.together
    assert (pair.first, pair.second) == ("recovery", "hcp" if hcp else "purity")
    assert pair.wells == 48
    assert 24.0 < pair.effective < 46.0
    assert pair.low < rho < pair.high
    assert pair.high - pair.low < 0.65
    if rho:
        assert np.sign(pair.rho) == np.sign(rho)
        assert abs(pair.rho) > 0.5


def test_only_wells_with_both_readings_tell(tmp_path):
    plates = [plate(seed, 0.8) for seed in (1, 2)]
    # Half of the wells carry recovery alone; one reading of purity is censored.
    for number, frame in enumerate(plates):
        frame["purity"] = frame["purity"].astype(object)
        frame.loc[frame.index % 2 == number, "purity"] = ""
    plates[0].loc[1, "purity"] = "<0.9"
    view = view_of(tmp_path, plates, [RECOVERY, PURITY])
    (pair,) = view.together
    assert pair.wells == 23
    assert pair.effective < 23.0
    assert pair.low < 0.8 < pair.high
    assert pair.rho > 0.3


def test_order_of_wells_and_of_responses_makes_no_difference(tmp_path):
    plates = [plate(seed, 0.6) for seed in (1, 2)]
    ours = view_of(tmp_path / "one", plates, [RECOVERY, PURITY]).together[0]
    turned = [frame.iloc[::-1].reset_index(drop=True) for frame in plates[::-1]]
    theirs = view_of(tmp_path / "other", turned, [PURITY, RECOVERY]).together[0]
    assert (theirs.first, theirs.second) == (ours.second, ours.first)
    assert theirs.rho == pytest.approx(ours.rho, abs=0.02)
    assert theirs.effective == pytest.approx(ours.effective, rel=0.02)


def test_few_wells_give_no_correlation(tmp_path):
    frame = plate(1, 0.9)
    frame["purity"] = frame["purity"].astype(object)
    frame.loc[3:, "purity"] = ""
    view = view_of(tmp_path, [frame], [RECOVERY, PURITY])
    (pair,) = view.together
    assert (pair.wells, pair.rho, pair.told) == (3, 0.0, False)
    assert np.isnan(pair.low)
    (check,) = readings_together(view.study, view.together)
    assert check.sentence == (
        "Recovery and Purity: 3 wells with both readings cannot tell whether they move together; "
        "they are taken as independent."
    )
    table = view.at(frame)
    product = table["recovery_p_well"] * table["purity_p_well"]
    np.testing.assert_allclose(table["p_well"], product, rtol=1e-12)


def test_wells_that_the_fit_uses_up_tell_nothing(tmp_path):
    # Seven wells have both, but a quadratic in two factors leaves less than four of them.
    frame = plate(1, 0.9, count=7)
    view = view_of(tmp_path, [frame], [RECOVERY, PURITY])
    (pair,) = view.together
    assert pair.wells == 7
    assert pair.effective < 4.0
    assert (pair.rho, pair.told) == (0.0, False)


def test_wells_may_carry_different_responses(tmp_path):
    # Recovery in one plate, purity in another, and five wells with both.
    first, second = plate(1, 0.5), plate(2, 0.5)
    first["purity"] = first["purity"].astype(object)
    first.loc[5:, "purity"] = ""
    second["recovery"] = ""
    view = view_of(tmp_path, [first, second], [RECOVERY, PURITY])
    counts = view.study.counts()
    assert counts.read == {"recovery": 24, "purity": 29}
    assert view.together[0].wells == 5
    table = view.at(first)
    truth = 0.95 / (1.0 + np.exp(-1.5 + 0.008 * (first["salt"] - 250.0)))
    assert np.abs(table["purity_mean"] - truth).mean() < 0.03
    window = view.window()
    assert 0.0 < window.share < 1.0
    plan = muntin.propose(view, wells=4, seed=1)
    assert (plan.wells["role"] == "test").sum() == 4


def test_a_response_with_few_readings_is_judged_all_the_same(tmp_path):
    frames = [plate(seed, 0.5) for seed in (1, 2)]
    for frame in frames:
        frame["purity"] = frame["purity"].astype(object)
        frame.loc[2:, "purity"] = ""
    view = view_of(tmp_path, frames, [RECOVERY, PURITY])
    assert view.study.counts().read["purity"] == 4
    table = view.at(frames[0])
    assert table["p_well"].between(0.0, 1.0).all()
    assert view.together[0].rho == 0.0
    # So little is known of purity that its interval spans most of what it may be.
    assert (table["purity_high"] - table["purity_low"]).max() > 0.4


def test_many_wells_are_taken_evenly(tmp_path, monkeypatch):
    plates = [plate(seed, 0.8, hcp=True) for seed in (1, 2, 3)]
    view = view_of(tmp_path, plates, [RECOVERY, HCP])
    monkeypatch.setattr(residuals, "_MOST_WELLS", 40)
    (some,) = residual_correlations(view.study, view.stacks)
    assert some.wells == 72
    assert some.effective < 40.0
    assert abs(some.rho - view.together[0].rho) < 0.2


def test_setting_errors_are_told_apart_from_noise(tmp_path):
    # Wells lie off their pH; both responses follow it, their noise does not go together.
    salt = {**SALT, "low": 200, "high": 300, "step": 10}
    plates = []
    for seed in (1, 2):
        rng = np.random.default_rng(seed)
        frame = spread([PH, salt], 30, seed)
        off = 0.08 * rng.normal(size=30)
        f = logit_of(frame.assign(ph=frame["ph"] + off))
        fall = 2.0 - 1.6 * (frame["ph"] + off - 6.0)
        recovery = 1.0 / (1.0 + np.exp(-f)) + 0.02 * rng.normal(size=30)
        purity = 1.0 / (1.0 + np.exp(-fall)) + 0.02 * rng.normal(size=30)
        plates.append(frame.assign(recovery=recovery.round(5), purity=purity.round(5)))
    blind = view_of(tmp_path / "a", plates, [RECOVERY, PURITY], factors=[PH, salt])
    seeing = view_of(
        tmp_path / "b", plates, [RECOVERY, PURITY], factors=[{**PH, "set_sd": 0.08}, salt]
    )
    assert blind.together[0].high < 0.0
    assert seeing.together[0].low < 0.0 < seeing.together[0].high
    # And in a new well the setting moves them against each other again.
    grid = seeing.window().grid[["ph", "salt"]]
    table = replace(seeing, together=()).at(grid)
    gain = table["p_well"] - table["recovery_p_well"] * table["purity_p_well"]
    assert gain.min() < -2e-3
    assert gain.max() < 1e-3


# The matrix of several responses, and the sentence.


def pair(first, second, rho, effective=20.0):
    return Together(
        first=first,
        second=second,
        wells=24,
        effective=effective,
        rho=rho,
        low=rho - 0.2,
        high=rho + 0.1,
    )


def test_matrix_of_responses():
    every = (pair("b", "a", 0.5), pair("a", "c", 0.4, effective=3.0), pair("d", "a", 0.9))
    R = correlation_matrix(["a", "b", "c"], every)
    assert R.tolist() == [[1.0, 0.5, 0.0], [0.5, 1.0, 0.0], [0.0, 0.0, 1.0]]
    assert correlation_matrix(["a"], every).tolist() == [[1.0]]


def test_contradicting_pairs_give_the_nearest_matrix():
    every = (pair("a", "b", 0.9), pair("b", "c", 0.9), pair("a", "c", -0.9))
    R = correlation_matrix(["a", "b", "c"], every)
    assert np.linalg.eigvalsh(R).min() > -1e-12
    np.testing.assert_allclose(np.diag(R), 1.0)
    assert R[0, 1] > 0.0 > R[0, 2]
    assert 0.3 < R[0, 1] < 0.9


@pytest.mark.parametrize(
    ("rho", "said"),
    [
        (0.6, "move together (0.6, 95 % 0.4 to 0.7)"),
        (-0.6, "move against each other (-0.6, 95 % -0.8 to -0.5)"),
        (0.1, "may move together or not (0.1, 95 % -0.1 to 0.2)"),
    ],
)
def test_sentence(tmp_path, rho, said):
    study = written(tmp_path, [plate(1, 0.0)], responses=[RECOVERY, PURITY])
    (check,) = readings_together(study, (pair("recovery", "purity", rho),))
    assert check.sentence == f"Recovery and Purity: readings of one well {said}."
    assert check.passed
    # A tracked response has no target to meet together with others.
    tracked = (pair("recovery", "colour", rho),)
    assert readings_together(study, tracked) == []


def test_estimates_stand_in_the_checks(tmp_path):
    view = view_of(tmp_path, [plate(1, 0.8)], [RECOVERY, PURITY])
    (check,) = (c for c in view.checks() if c.name == "readings together")
    assert check.sentence.startswith("Recovery and Purity: readings of one well move together (0.")


@pytest.mark.slow
def test_intervals_hold_the_truth_as_often_as_they_say(tmp_path):
    # 120 studies of one plate; correlations from the prior that the estimate has.
    rng, hits, means, truths = np.random.default_rng(3), 0, [], []
    for number in range(120):
        rho = float(np.tanh(0.5 * rng.normal()))
        view = view_of(tmp_path / str(number), [plate(number, rho, hcp=True)], [RECOVERY, HCP])
        found = view.together[0]
        hits += found.low < rho < found.high
        means.append(found.rho)
        truths.append(rho)
    assert binom.ppf(0.005, 120, 0.95) <= hits <= binom.ppf(0.995, 120, 0.95)
    slope, error = np.polyfit(means, truths, 1, cov=True)
    assert slope[0] == pytest.approx(1.0, abs=3.0 * np.sqrt(error[0, 0]))
