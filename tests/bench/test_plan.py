"""The next plate: conditions at final wells, each with a reason."""

from dataclasses import replace
from unittest import mock

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import muntin
from muntin.bench import default_controls, well_range
from muntin.bench.plan import next_plate
from muntin.bench.protein import protein_left_mg
from muntin.design.selection import select
from muntin.design.stopping import Ruling
from muntin.record import StudyFaults
from tests.studies import (
    HCP,
    LOAD,
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
PROTEIN = {"available_mg": 40.0, "reserved_mg": 10.0, "per_well_mg": 0.25}
EXPECTED = ["wrong_share", "set_point", "reached"]
CONTROLS = {"blank": 2, "load": 4, "no_resin": 2}


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    study = written(tmp_path_factory.mktemp("two") / "study", EARLIER)
    return muntin.assess(study, "stacked")


def roles(plan):
    return plan.wells["role"].value_counts().to_dict()


def conditions(plan, role=None):
    rows = plan.wells.dropna(subset=["p_now"])
    return rows if role is None else rows[rows["role"] == role]


# What a plan is.


@pytest.mark.parametrize("aim", ["edge", "best", "both"])
def test_a_plan_has_its_wells_bridging_wells_and_controls(view, aim):
    plan = muntin.propose(view, wells=9, aim=aim)
    assert plan.plate == "plate-03"
    assert (plan.aim, plan.seed, plan.protein_mg) == (aim, 1, None)
    assert list(plan.wells.columns) == ["well", "role", "ph", "salt", "p_now", "reason"]
    assert roles(plan) == {"test": 9, "bridge": 4, **CONTROLS}
    assert plan.wells["well"].is_unique
    controls = plan.wells[plan.wells["role"].isin(CONTROLS)]
    assert controls[["ph", "salt", "p_now"]].isna().all(axis=None)
    assert (plan.wells["reason"].str.len() > 10).all()
    assert not conditions(plan)[["ph", "salt"]].isna().any(axis=None)


def test_rows_stand_in_plate_order_and_the_index_tells_the_order_of_choice(view):
    plan = muntin.propose(view, wells=9)
    place = [(name[0], int(name[1:])) for name in plan.wells["well"]]
    assert place == sorted(place)
    chosen = plan.wells.sort_index()
    assert list(chosen.index) == list(range(len(plan.wells)))
    assert list(chosen["role"][:13]) == ["bridge"] * 4 + ["test"] * 9
    assert list(chosen["role"][13:]) == ["blank"] * 2 + ["load"] * 4 + ["no_resin"] * 2


def test_p_now_is_the_judged_probability(view):
    for by in ("mean", "well", "kept"):
        kept = [{**PH, "kept_within": 0.2}, SALT]
        judged = changed(view, factors=kept, study={"judged_by": by})
        rows = conditions(muntin.propose(judged, wells=5))
        p = judged.at(rows)[f"p_{by}"]
        np.testing.assert_allclose(rows["p_now"], p, rtol=1e-8)


def test_same_seed_same_plan(view):
    first, again, other = (muntin.propose(view, wells=8, seed=seed) for seed in (3, 3, 4))
    pd.testing.assert_frame_equal(first.wells, again.wells)
    pd.testing.assert_frame_equal(first.forecast, again.forecast)
    assert list(first.wells["well"]) != list(other.wells["well"])
    # The layout is drawn; the conditions follow from the readings alone.
    one, two = (p.wells.sort_index()[["role", "ph", "salt"]] for p in (first, other))
    pd.testing.assert_frame_equal(one, two)


def test_forecast(view):
    plan = muntin.propose(view, wells=6)
    assert list(plan.forecast.columns) == ["wells", "plates", *EXPECTED]
    assert list(plan.forecast["wells"]) == [0, 6, 12, 24, 48, 96]
    assert list(plan.forecast["plates"]) == [0, 1, 1, 1, 1, 2]
    share, best = plan.forecast["wrong_share"], plan.forecast["set_point"]
    assert share[0] == view.window().wrong_share
    assert best[0] == view.window().setpoint["probability"]
    assert (share.diff()[1:] < 0.0).all()
    assert (best.diff()[1:] >= 0.0).all()


def test_forecast_of_the_wells_asked_for(view):
    plan = muntin.propose(view, wells=9)
    assert list(plan.forecast["wells"]) == [0, 6, 9, 12, 24, 48, 96]
    shares = plan.forecast.set_index("wells")["wrong_share"]
    chosen = select(view, 9, "edge", 1).forecast
    assert shares[[6, 9]].tolist() == pytest.approx([chosen[6], chosen[9]], rel=1e-8)


def test_verdict_on_the_plan(view):
    share = muntin.propose(view, wells=12).forecast.set_index("wells")["wrong_share"]
    words = {
        0: Ruling(word="stop", because="met", wells=0),
        6: Ruling(word="go on with fewer", because="enough", wells=6),
        12: Ruling(word="go on", because="enough", wells=12),
        48: Ruling(word="go on", because="more are needed", wells=48),
    }
    for wells, ruling in words.items():
        asked = changed(view, stop={"wrong_share": 1.0001 * share[wells]})
        assert muntin.propose(asked, wells=12).ruling == ruling
    assert muntin.propose(view, wells=12).ruling == Ruling(word="none", because="no rule")


def test_no_verdict_on_a_window_that_the_data_do_not_support(view):
    asked = changed(view, stop={"wrong_share": 0.5})
    assert muntin.propose(asked, wells=2).ruling.because == "met"
    unsupported = replace(asked.window(), unsupported=("The readings do not fit.",))
    with mock.patch.object(type(asked), "window", return_value=unsupported):
        plan = muntin.propose(asked, wells=2)
    assert plan.ruling == Ruling(word="none", because="unsupported")
    assert plan.forecast[["set_point", "reached"]].isna().all(axis=None)
    assert plan.forecast["wrong_share"].notna().all()


def test_forecast_by_milligrams(view):
    # Bridging wells, loads and wells without resin are given protein; blanks are not.
    plan = muntin.propose(changed(view, protein=PROTEIN), wells=3)
    assert list(plan.forecast.columns) == ["wells", "plates", "mg", *EXPECTED]
    extra = 4 + 4 + 2
    # 24 mg are left after 24 wells; 96 more would take two plates and 29 mg.
    assert list(plan.forecast["wells"]) == [0, 3, 6, 12, 24, 48]
    assert list(plan.forecast["mg"]) == [0.0] + [0.25 * (extra + k) for k in (3, 6, 12, 24, 48)]
    assert plan.protein_mg == 0.25 * (extra + 3)


def test_another_aim_is_no_aim(view):
    with pytest.raises(ValueError, match=r"^aim 'middle' is none of edge, best, both$"):
        muntin.propose(view, aim="middle")


# Names of plates.


def test_next_plate_follows_the_last_with_wells(tmp_path):
    assert next_plate(written(tmp_path / "none")) == "plate-01"
    assert next_plate(written(tmp_path / "two", EARLIER)) == "plate-03"
    many = written(tmp_path / "many", [EARLIER[0].head(2)] * 11)
    assert next_plate(many) == "plate-12"
    few = written(tmp_path / "few", EARLIER).folder
    (few / "plates" / "plate-02.csv").rename(few / "plates" / "plate-07.csv")
    assert next_plate(muntin.open_study(few)) == "plate-08"


# Notices.


def test_awaited_response_makes_the_plan_provisional(tmp_path):
    plates = [plate.assign(hcp="") for plate in EARLIER]
    responses = [RECOVERY, {**HCP, "label": "Host cell protein"}]
    stop = {"wrong_share": 0.5}
    study = written(tmp_path / "study", plates, responses=responses, stop=stop)
    plan = muntin.propose(muntin.assess(study, "quadratic"), wells=3)
    assert plan.ruling == Ruling(word="none", because="awaited")
    said = "provisional: no reading yet of Host cell protein, which the plan does not weigh"
    assert said in plan.notices


def test_plates_without_a_reading_are_told(tmp_path):
    plates = [EARLIER[0], *[plate.assign(recovery="") for plate in EARLIER]]
    view = muntin.assess(written(tmp_path / "study", plates), "quadratic")
    said = "no reading yet of plate-02, plate-03: the plan does not know of wells there"
    assert said in muntin.propose(view, wells=3).notices
    none = muntin.assess(written(tmp_path / "read", EARLIER), "quadratic")
    assert not any("no reading yet" in n for n in muntin.propose(none, wells=3).notices)


def test_bridging_wells_that_cannot_be_are_told(view):
    # Nothing was run at pH 4.5 with 450 mM.
    narrow = changed(view, factors=[{**PH, "plan_high": 4.5}, {**SALT, "plan_low": 450}])
    plan = muntin.propose(narrow, wells=4)
    assert "no bridging wells: no earlier condition lies in the plan's range" in plan.notices
    assert roles(plan) == {"test": 4, **CONTROLS}


def test_plan_without_bridging_wells_by_choice_says_nothing_of_them(view):
    plan = muntin.propose(changed(view, plan={"bridging_wells": 0}), wells=2)
    assert not any("bridging" in notice for notice in plan.notices)
    assert roles(plan) == {"test": 2, **CONTROLS}


def test_fewer_wells_that_would_do_are_told(view):
    plan = muntin.propose(view, wells=24)
    (said,) = (notice for notice in plan.notices if "would do" in notice)
    share = np.array(select(view, 24, "edge", 1).forecast)
    enough = int(np.argmax(share[0] - share >= 0.9 * (share[0] - share[-1])))
    some, last = (f"{100 * value:.1f} %" for value in (share[enough], share[-1]))
    assert said == (
        f"{enough} test wells would do nearly as well: {some} still called wrongly, "
        + (f"against {last} with 24" if some != last else "as with 24")
    )
    assert enough < 24


# Faults.


def faults(view, **settings):
    with pytest.raises(StudyFaults) as found:
        muntin.propose(view, **settings)
    return found.value.lines()


@pytest.mark.parametrize("wells", [0, -3])
def test_no_wells(view, wells):
    assert faults(view, wells=wells) == [f"wells: {wells} must be 1 or more"]


def test_more_wells_than_the_plate_has(view):
    assert faults(view, wells=85) == [
        "wells: 85 is more than the plate has room for; ask for 84 (96 wells are free; "
        "4 bridging wells and 8 controls come on top)"
    ]
    assert roles(muntin.propose(view, wells=84)) == {"test": 84, "bridge": 4, **CONTROLS}


def test_more_wells_than_are_free(view):
    used = changed(view, plan={"free_wells": "A1:B12", "bridging_wells": 3})
    assert faults(used, wells=16) == [
        "wells: 16 is more than the plate has room for; ask for 15 (24 wells are free; "
        "3 bridging wells and 6 controls come on top)"
    ]
    plan = muntin.propose(used, wells=15)
    assert set(plan.wells["well"]) == set(well_range("A1:B12", 96))


def test_more_wells_than_the_protein_allows(view):
    # 24 wells were run: 10 - 2 - 6 = 2 mg are left, 8 wells of 0.25 mg; 10 come on top.
    scarce = {"available_mg": 10.0, "reserved_mg": 0.5, "per_well_mg": 0.25}
    assert faults(changed(view, protein=scarce), wells=5) == [
        "wells: 5 is more than the protein allows; ask for 4 (3.5 mg left beyond the reserve; "
        "4 bridging wells and 8 controls come on top)"
    ]
    plan = muntin.propose(changed(view, protein=scarce), wells=4)
    assert plan.protein_mg == 3.5


def test_protein_that_is_used_up(view):
    spent = {"available_mg": 6.0, "per_well_mg": 0.25}
    assert faults(changed(view, protein=spent), wells=1) == [
        "wells: 1 is more than the protein allows; not even the bridging wells fit (0 mg left "
        "beyond the reserve; 4 bridging wells and 8 controls come on top)"
    ]


@pytest.mark.parametrize("available", [10.0, 40.0])
def test_plate_and_protein_in_one_fault_with_one_number(view, available):
    scarce = changed(view, protein={"available_mg": available, "per_well_mg": 0.25})
    (line,) = faults(scarce, wells=200)
    assert line.startswith("wells: 200 is more than plate and protein allow; ask for ")
    assert line.endswith(
        " mg left beyond the reserve; 4 bridging wells and 8 controls come on top)"
    )
    most = int(line.split("ask for ")[1].split(" (")[0])
    assert len(muntin.propose(scarce, wells=most, seed=1).wells.query("role == 'test'")) == most
    (more,) = faults(scarce, wells=most + 1)
    binding = "the protein allows" if available == 10.0 else "the plate has room for"
    assert more.startswith(f"wells: {most + 1} is more than {binding}; ask for {most} (")


def test_an_opening_plate_needs_no_room_for_bridging_wells(tmp_path):
    fresh = muntin.assess(written(tmp_path / "study"), "quadratic")
    assert faults(fresh, wells=89) == [
        "wells: 89 is more than the plate has room for; ask for 88 (96 wells are free; "
        "0 bridging wells and 8 controls come on top)"
    ]


def test_stocks_that_do_not_fit_on_lines(view):
    lines = {"free_wells": "A1:H1", "prepared_by": "column", "bridging_wells": 0}
    levels = [{**PH, "per_plate": 3}, SALT]
    (said,) = faults(changed(view, plan=lines, factors=levels), wells=6)
    assert said.startswith("study.toml, plan: ")
    assert said.endswith("(free more wells, ask for fewer, or lower per_plate)")


# Layout.


@pytest.mark.parametrize(("prepared_by", "letter"), [("row", True), ("column", False)])
def test_a_line_is_fed_one_level_of_the_factor_with_few(view, prepared_by, letter):
    levels = [{**PH, "per_plate": 3}, SALT]
    plan = muntin.propose(
        changed(view, factors=levels, plan={"prepared_by": prepared_by}), wells=20
    )
    rows = conditions(plan)
    line = rows["well"].str[0] if letter else rows["well"].str[1:]
    assert (rows.groupby(line)["ph"].nunique() == 1).all()
    assert 1 < rows["ph"].nunique() <= 3


def test_384_wells(view):
    plan = muntin.propose(changed(view, study={"plate": 384}), wells=10)
    assert roles(plan) == {"test": 10, "bridge": 4, **default_controls(384)}


# Other studies.


def test_opening_plate(tmp_path):
    view = muntin.assess(written(tmp_path / "study", protein=PROTEIN), "stacked")
    plan = muntin.propose(view, wells=8)
    assert plan.plate == "plate-01"
    assert roles(plan) == {"test": 8, **CONTROLS}
    assert list(plan.forecast["wells"]) == [0, 6, 8, 12, 24, 48, 96]
    assert plan.forecast["wrong_share"][0] == pytest.approx(view.window().wrong_share, abs=1e-12)
    assert plan.forecast["wrong_share"][1:].isna().all()
    assert plan.forecast[["set_point", "reached"]].isna().all(axis=None)
    assert plan.ruling == Ruling(word="none", because="no rule")
    assert plan.forecast["mg"][1] == 0.25 * (6 + 4 + 2)
    # The second plate has bridging wells beside its controls.
    assert plan.forecast["mg"][6] == 0.25 * (96 + 2 * (4 + 2) + 4)
    said = set(conditions(plan)["reason"])
    assert said == {
        "opening plate, spread to find where the target is met",
        "well 2 of this condition: averages the noise",
    }
    assert plan.notices == ()


def test_factor_with_choices(tmp_path):
    factors = [PH, {**RESIN, "plan_choices": ["Alpha", "Gamma"]}]
    study = written(tmp_path / "study", [read(spread([PH, RESIN], 14))], factors=factors)
    plan = muntin.propose(muntin.assess(study, "quadratic"), wells=6)
    rows = conditions(plan)
    assert set(rows["resin"]) <= {"Alpha", "Gamma"}
    assert plan.wells["resin"].isna().sum() == 8
    assert roles(plan)["bridge"] == 4


def test_per_cent_gives_the_plan_of_the_fraction(tmp_path):
    # Readings in 64ths have exact per cents, so that both studies hold the very same numbers.
    plates = [plate.assign(recovery=(64.0 * plate["recovery"]).round() / 64.0) for plate in EARLIER]
    per_cent = [plate.assign(recovery=100.0 * plate["recovery"]) for plate in plates]
    response = {**RECOVERY, "unit": "%", "at_least": 80}
    fraction = written(tmp_path / "fraction", plates)
    other = written(tmp_path / "per cent", per_cent, responses=[response])
    plans = [muntin.propose(muntin.assess(s, "stacked"), wells=6) for s in (other, fraction)]
    pd.testing.assert_frame_equal(plans[0].wells, plans[1].wells, rtol=1e-9)


@pytest.mark.parametrize(
    ("response", "add"), [({**HCP, "at_most": 30}, read_hcp), (SHIFT, read_shift)]
)
@pytest.mark.parametrize("aim", ["edge", "best"])
def test_positive_and_real_responses(tmp_path, response, add, aim):
    plates = [add(plate).drop(columns="recovery") for plate in EARLIER]
    study = written(tmp_path / "study", plates, responses=[response])
    view = muntin.assess(study, "stacked")
    plan = muntin.propose(view, wells=5, aim=aim)
    share = plan.forecast["wrong_share"]
    assert share[0] == pytest.approx(view.window().wrong_share, abs=1e-9)
    assert (share.diff()[1:] < 0.0).all()
    rows = conditions(plan, "test")
    np.testing.assert_allclose(rows["p_now"], view.at(rows)["p_well"], rtol=1e-8)


def test_two_responses(tmp_path):
    plates = [read_hcp(plate) for plate in EARLIER]
    responses = [RECOVERY, {**HCP, "at_most": 30}]
    study = written(tmp_path / "study", plates, responses=responses)
    view = muntin.assess(study, "stacked")
    plan = muntin.propose(view, wells=6, aim="both")
    rows = conditions(plan)
    table = view.at(rows)
    np.testing.assert_allclose(rows["p_now"], table["p_well"], rtol=1e-9)
    assert plan.forecast["wrong_share"].is_monotonic_decreasing


@pytest.mark.slow
def test_four_factors(tmp_path):
    factors = [PH, SALT, LOAD, RESIN]
    study = written(tmp_path / "study", [read(spread(factors, 16))], factors=factors)
    plan = muntin.propose(muntin.assess(study, "quadratic"), wells=1)
    assert list(plan.wells.columns[2:6]) == ["ph", "salt", "load", "resin"]
    assert roles(plan) == {"test": 1, "bridge": 4, **CONTROLS}


# No plan breaks what the study asks, whatever it asks.


def on_steps(values, low, step):
    away = (values - low) / step
    return (away - away.round()).abs().max() < 1e-9


LIMITS = ["salt <= 500 - 60 * (ph - 4.5)", "ph + salt / 100 >= 6", "ph <= 7"]


@st.composite
def rules(draw):
    # A pass and a fail are bridged, so that two levels at least are needed of each factor.
    ph = {**PH, "per_plate": draw(st.one_of(st.none(), st.integers(2, 5)))}
    salt = {**SALT, "per_plate": draw(st.one_of(st.none(), st.integers(2, 5)))}
    if draw(st.booleans()):
        ph |= {"plan_low": draw(st.sampled_from([4.5, 5.2])), "plan_high": 7.1}
    if draw(st.booleans()):
        salt |= {"plan_high": draw(st.sampled_from([310, 420]))}
    factors = [{k: v for k, v in factor.items() if v is not None} for factor in (ph, salt)]
    plan = {
        "bridging_wells": draw(st.integers(0, 5)),
        "repeats_min": draw(st.integers(1, 3)),
        "free_wells": draw(st.sampled_from(["A1:H12", "C3:H9", "A1:A3, D1:E12", "B2:B4"])),
        "prepared_by": draw(st.sampled_from(["well", "row", "column"])),
    }
    limits = [{"allow": text} for text in draw(st.lists(st.sampled_from(LIMITS), unique=True))]
    protein = {"available_mg": draw(st.sampled_from([9.0, 12.0, 40.0])), "per_well_mg": 0.25}
    return {"factors": factors, "plan": plan, "limits": limits, "protein": protein}


@pytest.fixture(scope="module")
def under(view):
    """The study under other rules; a function, as a whole study is too long to be shown."""
    return lambda **given: changed(view, **given)


@settings(deadline=None, derandomize=True, max_examples=50)
@given(rules(), st.integers(1, 30), st.sampled_from(["edge", "best", "both"]), st.integers(0, 9))
def test_no_plan_breaks_the_rules(under, given, wells, aim, seed):
    asked, plan, refused = under(**given), None, ""
    try:
        plan = muntin.propose(asked, wells=wells, aim=aim, seed=seed)
    except StudyFaults as found:
        refused = str(found)
    if plan is None:
        assert may_be_refused(asked, refused, wells)
        return
    free = well_range(given["plan"]["free_wells"], 96)
    assert plan.wells["well"].is_unique
    assert set(plan.wells["well"]) <= set(free)
    count = roles(plan)
    assert count["test"] == wells
    assert count.get("bridge", 0) in (0, given["plan"]["bridging_wells"])
    wanted = {role: n for role, n in default_controls(96, len(free)).items() if n}
    assert {role: count[role] for role in wanted} == wanted
    rows = conditions(plan)
    assert asked.study.definition.allowed(rows).all()
    for factor, (low, step) in zip(given["factors"], ((4.5, 0.5), (50, 50)), strict=True):
        values = rows[factor["name"]].astype(float)
        assert on_steps(values, low, step)
        assert values.min() >= factor.get("plan_low", low)
        assert values.max() <= factor.get("plan_high", factor["high"])
        assert values.nunique() <= factor.get("per_plate", 99)
    bridged = rows.groupby(["ph", "salt"])["role"].agg(lambda role: (role == "bridge").any())
    repeats = rows.groupby(["ph", "salt"]).size()[~bridged]
    assert (repeats >= min(given["plan"]["repeats_min"], wells)).all()
    assert plan.protein_mg <= protein_left_mg(asked.study) + 1e-9


def may_be_refused(asked, text, wells):
    """Whether room, protein or stocks do not suffice for the plan that was refused."""
    definition = asked.study.definition
    bridging, free = definition.plan.bridging_wells, len(definition.free_wells)
    controls = default_controls(96, free)
    room = free - bridging - sum(controls.values())
    loaded = wells + bridging + controls["load"] + controls["no_resin"]
    short = 0.25 * loaded > protein_left_mg(asked.study) + 1e-9
    if "plate and protein allow;" in text:
        return wells > room and short
    if "room for" in text or "protein allows" in text:
        return ("room for" in text) == (wells > room) and ("protein allows" in text) == short
    return text.startswith("study.toml, plan: ") and definition.plan.prepared_by != "well"
