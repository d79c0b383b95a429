"""Where a study stands: columns, units, joint probabilities, faults."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import muntin
from muntin.record import StudyFaults
from muntin.window.grid import judged_grid
from tests.studies import (
    HCP,
    PH,
    RECOVERY,
    RESIN,
    SALT,
    SHIFT,
    changed,
    read,
    read_hcp,
    read_shift,
    spread,
    written,
)

FACTORS = [PH, SALT]
EARLIER = [read(spread(FACTORS, 12, seed), seed, error) for seed, error in ((1, 0.02), (2, -0.03))]
ASKED = pd.DataFrame(
    {"note": "x", "salt": [100, 250, 400, 250], "ph": [7.0, 6.0, 5.0, 6.0]},
    index=["d", "b", "a", "b"],
)


def assessed(folder, plates=EARLIER, surrogate="stacked", **given):
    return muntin.assess(written(folder / "study", plates, **given), surrogate)


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    return assessed(tmp_path_factory.mktemp("two"))


@pytest.fixture(scope="module")
def joint(tmp_path_factory):
    plates = [read_shift(read_hcp(plate)) for plate in EARLIER]
    responses = [RECOVERY, {**HCP, "at_most": 30}, {"name": "shift", "kind": "real"}]
    return assessed(tmp_path_factory.mktemp("joint"), plates, responses=responses)


# The table at conditions.


def test_columns_and_index(view):
    table = view.at(ASKED)
    assert list(table.columns) == [
        *("recovery_mean", "recovery_low", "recovery_high", "recovery_p_mean", "recovery_p_well"),
        *("p_mean", "p_well"),
    ]
    assert list(table.index) == ["d", "b", "a", "b"]
    np.testing.assert_allclose(table.iloc[1], table.iloc[3])
    assert ((table >= 0.0) & (table <= 1.0)).all(axis=None)


def test_columns_of_a_tracked_response(joint):
    table = joint.at(ASKED)
    assert [name for name in table if name.startswith("shift")] == [
        *("shift_mean", "shift_low", "shift_high"),
    ]
    assert list(table.columns[-2:]) == ["p_mean", "p_well"]


def test_order_of_rows_and_columns_makes_no_difference(view):
    table = view.at(ASKED)
    turned = view.at(ASKED[["ph", "salt"]].iloc[::-1])
    np.testing.assert_allclose(turned.iloc[::-1], table, rtol=1e-9)


def test_no_conditions_give_an_empty_table(view):
    table = view.at(ASKED.iloc[:0])
    assert table.shape == (0, 7)


def test_mean_lies_in_its_interval_and_the_interval_is_central(view):
    grid, _ = judged_grid(view.study.definition)
    table = view.at(grid)
    assert (table["recovery_low"] < table["recovery_mean"]).all()
    assert (table["recovery_mean"] < table["recovery_high"]).all()
    # The probability of a target at an end of the interval is that end's tail: by the nodes, which
    # give the interval, exactly; by their cloud nearly.
    row = grid.iloc[[30]]
    low, high = table.loc[30, ["recovery_low", "recovery_high"]]
    for target, above in ((low, 0.975), (high, 0.025)):
        at = changed(view, responses=[{**RECOVERY, "at_least": float(target)}])
        assert at.at(row)["recovery_p_mean"].iloc[0] == pytest.approx(above, abs=0.01)
        nodes = {name: replace(s, cloud=None) for name, s in at.surfaces.items()}
        found = replace(at, surfaces=nodes).at(row)["recovery_p_mean"].iloc[0]
        assert found == pytest.approx(above, abs=1e-6)


def test_readings_are_met(view):
    # The interval of the process mean holds most readings, give or take their noise of 0.02.
    frame = pd.concat(EARLIER, ignore_index=True)
    table = view.at(frame)
    away = (frame["recovery"] - table["recovery_mean"]).abs()
    assert away.max() < 0.12
    assert away.mean() < 0.03


def test_joint_p_mean_is_the_product_over_judged_responses(joint):
    table = joint.at(ASKED)
    product = table["recovery_p_mean"] * table["hcp_p_mean"]
    np.testing.assert_allclose(table["p_mean"], product, rtol=1e-12)
    np.testing.assert_allclose(joint.judged(ASKED, "mean"), product, rtol=1e-9)


def test_joint_p_well_follows_the_noise_that_readings_share(joint):
    grid, _ = judged_grid(joint.study.definition)
    table = joint.at(grid)
    np.testing.assert_allclose(joint.judged(grid, "well"), table["p_well"], rtol=1e-9)
    product = table["recovery_p_well"] * table["hcp_p_well"]
    (pair,) = (t for t in joint.together if (t.first, t.second) == ("recovery", "hcp"))
    gain = table["p_well"] - product
    assert np.sign(gain[np.abs(gain) > 1e-6]).eq(-np.sign(pair.rho)).all()
    assert np.abs(gain).max() > 1e-3
    apart = replace(joint, together=())
    np.testing.assert_allclose(apart.at(grid)["p_well"], product, rtol=1e-12)


def test_targets_between_add_up(view):
    whole = view.at(ASKED)
    part = changed(view, responses=[{**RECOVERY, "at_least": 0.4, "at_most": 0.8}]).at(ASKED)
    low = changed(view, responses=[{**RECOVERY, "at_least": 0.4}]).at(ASKED)
    for column in ("p_mean", "p_well"):
        np.testing.assert_allclose(part[column], low[column] - whole[column], atol=1e-6)
    below = changed(view, responses=[{"name": "recovery", "kind": "fraction", "at_most": 0.8}])
    np.testing.assert_allclose(below.at(ASKED)["p_mean"], 1.0 - whole["p_mean"], atol=1e-9)


def test_per_cent_shows_the_users_unit(tmp_path):
    plates = [plate.assign(recovery=(100 * plate["recovery"]).round(6)) for plate in EARLIER]
    plain = [plate.assign(recovery=plate["recovery"] / 100) for plate in plates]
    responses = [{**RECOVERY, "unit": "%", "at_least": 80}]
    ours = assessed(tmp_path / "ours", plates, responses=responses).at(ASKED)
    theirs = assessed(tmp_path / "theirs", plain, responses=[RECOVERY]).at(ASKED)
    for name in ("mean", "low", "high"):
        np.testing.assert_allclose(
            ours[f"recovery_{name}"], 100 * theirs[f"recovery_{name}"], rtol=1e-6
        )
    for name in ("recovery_p_mean", "recovery_p_well", "p_mean", "p_well"):
        np.testing.assert_allclose(ours[name], theirs[name], rtol=1e-5, atol=1e-9)


def test_a_positive_response_stays_positive(joint):
    grid, _ = judged_grid(joint.study.definition)
    table = joint.at(grid)
    assert (table["hcp_low"] > 0.0).all()
    # It was made to rise with salt, exp(0.006 a mM): over 400 mM by a factor of 11.
    ends = table["hcp_mean"][grid["ph"] == 6.0].iloc[[0, -1]].to_numpy()
    assert 7.0 < ends[1] / ends[0] < 17.0


def test_a_real_response(tmp_path):
    plates = [read_shift(plate) for plate in EARLIER]
    view = assessed(tmp_path, plates, responses=[SHIFT, {"name": "recovery", "kind": "fraction"}])
    table = view.at(ASKED)
    np.testing.assert_allclose(table["shift_mean"], 1.5 * (6.0 - ASKED["ph"]), atol=0.35)
    assert (table["p_mean"] == table["shift_p_mean"]).all()


@pytest.mark.parametrize("surrogate", ["gp", "quadratic", "stacked"])
def test_same_seed_same_numbers(tmp_path, surrogate):
    study = written(tmp_path / "study", EARLIER)
    first, again = (muntin.assess(study, surrogate, seed=5).at(ASKED) for _ in range(2))
    pd.testing.assert_frame_equal(first, again)


def test_another_seed_moves_little(tmp_path):
    study = written(tmp_path / "study", EARLIER)
    first, other = (muntin.assess(study, "gp", seed=seed).at(ASKED) for seed in (1, 2))
    assert not first.equals(other)
    np.testing.assert_allclose(first, other, atol=0.01)


def test_names_of_surrogates_and_engines(tmp_path):
    study = written(tmp_path / "study", EARLIER)
    with pytest.raises(ValueError, match=r"^surrogate 'tree' is none of gp, quadratic, stacked$"):
        muntin.assess(study, "tree")
    with pytest.raises(ValueError, match=r"^engine 'slow' is none of fast, nuts$"):
        muntin.assess(study, engine="slow")


# What is kept within its tolerances.

KEPT = [
    ({"ph": 0.1, "salt": "5 %"}, lambda frame: (0.1, 0.05 * frame["salt"]), 0.0005),
    ({"ph": 0.3, "salt": "10 %"}, lambda frame: (0.3, 0.10 * frame["salt"]), 0.003),
    ({"salt": 40}, lambda frame: (0.0, 40.0), 0.003),
]


@pytest.mark.parametrize(("within", "widths", "allowed"), KEPT)
def test_p_kept_agrees_with_settings_spread_within(view, within, widths, allowed):
    # 15 settings of each factor at the middles of even shares; three points stand for them.
    factors = [
        {**f, "kept_within": within[f["name"]]} if f["name"] in within else f for f in FACTORS
    ]
    kept = changed(view, factors=factors)
    grid, _ = judged_grid(kept.study.definition)
    p = kept.judged(grid, "well")
    edge = grid[(p > 0.02) & (p < 0.98)]
    assert len(edge) >= 8
    ph, salt = widths(edge)
    moved = [
        edge.assign(ph=edge["ph"] + u * ph, salt=edge["salt"] + v * salt)
        for u in (np.arange(15) - 7.0) / 7.5
        for v in (np.arange(15) - 7.0) / 7.5
    ]
    exact = kept.judged(pd.concat(moved), "well").reshape(len(moved), -1).mean(axis=0)
    np.testing.assert_allclose(kept.at(edge)["p_kept"], exact, atol=allowed)
    assert np.abs(exact - p[(p > 0.02) & (p < 0.98)]).max() > 10.0 * allowed


def test_p_kept_is_given_only_with_a_tolerance(view):
    assert "p_kept" not in view.at(ASKED)
    kept = changed(view, factors=[{**PH, "kept_within": 0.1}, SALT]).at(ASKED)
    assert list(kept.columns[-3:]) == ["p_mean", "p_well", "p_kept"]


def test_a_tolerance_of_nothing_keeps_p_well(view):
    kept = changed(view, factors=[{**PH, "kept_within": 0.0}, SALT]).at(ASKED)
    np.testing.assert_allclose(kept["p_kept"], kept["p_well"], rtol=1e-9)


def test_settings_of_a_log_scale_stay_above_nothing(tmp_path):
    load = {"name": "load", "low": 1, "high": 41, "step": 5, "scale": "log", "kept_within": 4}
    plate = read(spread([PH, load], 12))
    view = assessed(tmp_path, [plate], "quadratic", factors=[PH, load])
    table = view.at(pd.DataFrame({"ph": [6.0], "load": [1.0]}))
    assert 0.0 <= table["p_kept"].iloc[0] <= 1.0


# The window.


@pytest.mark.parametrize("by", ["mean", "well", "kept"])
def test_window_follows_what_is_judged(view, by):
    judged = changed(view, study={"judged_by": by}, factors=[{**PH, "kept_within": 0.2}, SALT])
    window = judged.window()
    table = judged.at(window.grid[["ph", "salt"]])
    np.testing.assert_allclose(window.grid["probability"], table[f"p_{by}"], rtol=1e-8)
    np.testing.assert_allclose(window.grid["p_mean"], table["p_mean"], rtol=1e-8)
    p = table["p_mean"]
    assert window.wrong_share == pytest.approx(np.minimum(p, 1.0 - p).mean(), rel=1e-8)
    assert window.share == (table[f"p_{by}"] >= 0.9).mean()
    assert window.setpoint["probability"] >= table[f"p_{by}"].max() - 5e-3


def test_kept_is_the_default_only_where_a_tolerance_is_given(view):
    assert view.study.definition.judged_by == "well"
    kept = changed(view, factors=[{**PH, "kept_within": 0.3}, SALT])
    assert kept.study.definition.judged_by == "kept"
    judged = [v.window().grid["probability"] for v in (kept, view)]
    assert np.abs(judged[0] - judged[1]).max() > 0.01


def test_a_higher_requirement_gives_a_smaller_window(view):
    shares = [
        changed(view, study={"required_probability": p}).window().share
        for p in (0.5, 0.8, 0.95, 0.995)
    ]
    assert shares == sorted(shares, reverse=True)
    assert shares[0] > shares[-1] > 0.0


def test_window_beyond_three_factors(tmp_path):
    factors = [PH, SALT, RESIN, {"name": "minutes", "low": 10, "high": 60, "step": 10}]
    view = assessed(tmp_path, [read(spread(factors, 16))], "quadratic", factors=factors)
    window = view.window()
    assert not window.regular
    assert window.ranges is None
    assert window.setpoint["resin"] == "Alpha"


# Nothing read, and not all read.


def test_nothing_run_speaks_from_the_prior(tmp_path):
    responses = [RECOVERY, {"name": "shift", "kind": "real"}]
    view = assessed(tmp_path, [], responses=responses)
    assert view.fresh
    assert view.awaited == ()
    table = view.at(ASKED)
    assert "shift_mean" not in table
    # The prior of a fraction is centred on half of its ceiling, some per cent below 1, and wide.
    assert table["recovery_mean"].between(0.46, 0.49).all()
    assert (table["recovery_high"] - table["recovery_low"] > 0.85).all()


def test_an_awaited_response_withholds_the_joint_probability(tmp_path):
    plates = [plate.assign(hcp="") for plate in EARLIER]
    factors = [{**PH, "kept_within": 0.1}, SALT]
    responses = [RECOVERY, HCP]
    view = assessed(tmp_path, plates, "quadratic", responses=responses, factors=factors)
    assert view.awaited == ("hcp",)
    assert not view.fresh
    assert list(view.at(ASKED).columns) == [
        *("recovery_mean", "recovery_low", "recovery_high", "recovery_p_mean", "recovery_p_well"),
    ]


def test_censored_readings_alone_speak_for_their_side(tmp_path):
    """All below 2, or all above it, where at most HCP["at_most"] is asked."""
    p = {}
    for sign in "<>":
        plates = [plate.assign(hcp=f"{sign}2") for plate in EARLIER]
        view = assessed(tmp_path / sign, plates, "quadratic", responses=[RECOVERY, HCP])
        assert view.awaited == ()
        p[sign] = view.at(ASKED)["hcp_p_mean"].to_numpy()
    assert (p["<"] > p[">"]).all()


# Faults of conditions.


def faults(view, **columns):
    with pytest.raises(StudyFaults) as found:
        view.at(pd.DataFrame(columns))
    return found.value.lines()


def test_missing_factors(view):
    assert faults(view, slat=[1.0]) == [
        "conditions, column ph: is missing (known: slat)",
        'conditions, column salt: is missing (did you mean "slat"?)',
    ]


@pytest.mark.parametrize(
    ("value", "shown"), [("x", '"x"'), (np.nan, "nan"), (np.inf, "inf"), (-np.inf, "-inf")]
)
def test_values_that_are_no_numbers(view, value, shown):
    lines = faults(view, ph=[5.0, value], salt=[100.0, 100.0])
    assert lines == [f"conditions, row 2, column ph: {shown} is not a number in 4.5 to 7.5"]


def test_choices_that_are_none(tmp_path):
    view = assessed(tmp_path, [read(spread([PH, RESIN], 12))], "quadratic", factors=[PH, RESIN])
    lines = faults(view, ph=[5.0] * 3, resin=["Alpha", "alpha", 3])
    assert lines == [
        'conditions, row 2, column resin: "alpha" is not one of Alpha, Beta, Gamma',
        "conditions, row 3, column resin: 3 is not one of Alpha, Beta, Gamma",
    ]


def test_values_that_a_log_scale_does_not_know(tmp_path):
    load = {"name": "load", "unit": "mg/mL", "low": 5, "high": 40, "step": 5, "scale": "log"}
    view = assessed(tmp_path, [read(spread([PH, load], 12))], "quadratic", factors=[PH, load])
    assert faults(view, ph=[5.0, 5.0], load=[0.0, -2.0]) == [
        "conditions, row 1, column load: 0 lies at or below 0, outside 5 to 40 mg/mL",
        "conditions, row 2, column load: -2 lies at or below 0, outside 5 to 40 mg/mL",
    ]


def test_all_faults_in_one_report(view):
    lines = faults(view, ph=["x"] * 7, salt=[np.nan, *[1.0] * 6])
    assert len(lines) == 7
    assert lines[-1] == "conditions, column ph: 2 more cells like these (is not a number in)"
    assert "conditions, row 1, column salt: nan is not a number in 50 to 450 mM" in lines
