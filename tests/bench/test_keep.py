"""A plan that was edited: its rows stay, are scored again, and a plate is chosen around them."""

import csv

import numpy as np
import pandas as pd
import pytest

import muntin
from muntin.record import StudyFaults
from muntin.report.plan_files import plan_table_text, write_plan
from tests.studies import LOAD, PH, RECOVERY, RESIN, SALT, changed, read, spread, written

FACTORS = [PH, SALT]
EARLIER = [read(spread(FACTORS, 12, seed), seed, error) for seed, error in ((1, 0.02), (2, -0.03))]


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    study = written(tmp_path_factory.mktemp("two") / "study", EARLIER)
    return muntin.assess(study, "quadratic")


@pytest.fixture
def offered(view):
    """A plan of 6 test wells as it was offered, its rows by well, and the file."""
    plan = muntin.propose(view, wells=6)
    folder = view.study.folder
    path, _ = write_plan(folder, plan.plate, plan_table_text(view.study.definition, plan))
    yield plan, path
    for file in (folder / "plans").rglob("*.*"):
        file.unlink()


def table(path):
    return list(csv.DictReader(path.read_text(encoding="utf-8").splitlines()))


def saved(path, rows):
    columns = list(dict.fromkeys(name for row in rows for name in row))
    with path.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.DictWriter(stream, columns, restval="")
        writer.writeheader()
        writer.writerows(rows)
    return path


def first_tests(rows, count):
    return [row for row in rows if row["role"] == "test"][:count]


def by_well(plan):
    return plan.wells.set_index("well")


# Nothing was edited.


def test_an_offered_plan_is_scored_as_it_was(view, offered):
    plan, path = offered
    again = muntin.propose(view, keep=path)
    names = ["role", "ph", "salt", "p_now", "reason"]
    pd.testing.assert_frame_equal(by_well(again)[names], by_well(plan)[names], rtol=1e-9)
    assert again.edit.changes == ()
    assert again.edit.offer.file == f"plans/offered/{path.name}"
    # Its wells are taken row by row and not in the order of choice, so parts of it may differ.
    assert again.forecast["wrong_share"][0] == plan.forecast["wrong_share"][0]
    assert again.wrong_share == pytest.approx(plan.wrong_share, rel=1e-6)
    assert again.edit.offered_share == pytest.approx(again.wrong_share, rel=1e-6)


# Rows that were edited.


def test_edits_are_kept_scored_and_told(view, offered):
    plan, path = offered
    rows = table(path)
    one, two, three, four = first_tests(rows, 4)
    free = next(w for w in ("H12", "H11", "H10") if w not in set(plan.wells["well"]))
    before = two["well"]
    one |= {"ph": "5.0", "salt": "450", "reason": "the site asks for it"}
    two["well"] = free
    three["exclude"] = "turbid at the bench"
    rows.remove(four)
    rows.append({"role": "test", "ph": "7.5", "salt": "50"})
    again = muntin.propose(view, keep=saved(path, rows))
    kept = by_well(again)
    assert (kept.loc[one["well"], "ph"], kept.loc[one["well"], "salt"]) == (5.0, 450.0)
    assert kept.loc[one["well"], "reason"] == "the site asks for it"
    assert kept.loc[free, "ph"] == float(two["ph"])
    added = again.wells[(again.wells["ph"] == 7.5) & (again.wells["salt"] == 50)]
    assert added["reason"].str.startswith("set by hand: probability").sum() == 1
    assert len(again.wells) == len(plan.wells) - 1
    told = {c.change.kind: c for c in again.edit.changes}
    assert sorted(c.change.kind for c in again.edit.changes) == sorted(
        ["changed", "moved", "left out", "left out", "added"]
    )
    assert told["changed"].change.because == "the site asks for it"
    moved = told["moved"].change
    assert (moved.was.well, moved.now.well) == (before, free)
    assert "turbid at the bench" in [c.change.because for c in again.edit.changes]
    assert told["added"].change.now.well in set(added["well"])
    asked = pd.DataFrame({"ph": [5.0], "salt": [450.0]})
    assert told["changed"].p_now == pytest.approx(view.at(asked)["p_well"].iloc[0], rel=1e-9)


def test_p_now_and_forecast_are_of_the_edited_plan(view, offered):
    # A plan whose test wells all lie far outside the edge tells less than the offered one.
    _, path = offered
    rows = table(path)
    for row in first_tests(rows, 6):
        row |= {"ph": "4.5", "salt": "50"}
    again = muntin.propose(view, keep=saved(path, rows))
    tests = again.wells[again.wells["role"] == "test"]
    np.testing.assert_allclose(tests["p_now"], view.at(tests)["p_well"], rtol=1e-8)
    assert again.wrong_share > 1.02 * again.edit.offered_share
    assert len(tests) == 6


def test_bridging_wells_and_controls_stay_and_what_lacks_is_told(view, offered):
    _, path = offered
    rows = [row for row in table(path) if row["role"] in ("test", "load")]
    again = muntin.propose(view, keep=saved(path, rows))
    assert again.wells["role"].value_counts().to_dict() == {"test": 6, "load": 4}
    assert again.notices[:3] == (
        "the plan keeps 0 of 4 bridging wells",
        "the plan keeps 0 of 2 blank wells",
        "the plan keeps 0 of 2 no_resin wells",
    )


# A plate around what is kept.


def test_a_whole_plate_is_chosen_around_locked_rows(view, offered):
    _, path = offered
    locked = [
        {"well": "C3", "role": "test", "ph": "6.5", "salt": "150"},
        {"well": "F9", "role": "test", "ph": "5.5", "salt": "400"},
    ]
    plan = muntin.propose(view, wells=9, keep=saved(path, locked))
    count = plan.wells["role"].value_counts().to_dict()
    assert count == {"test": 9, "bridge": 4, "blank": 2, "load": 4, "no_resin": 2}
    kept = by_well(plan)
    assert tuple(kept.loc["C3", ["ph", "salt"]]) == (6.5, 150.0)
    assert tuple(kept.loc["F9", ["ph", "salt"]]) == (5.5, 400.0)
    assert plan.wells["well"].is_unique
    kinds = [c.change.kind for c in plan.edit.changes]
    # 18 rows were offered, 21 are there now, two of them added by the user.
    assert kinds.count("added") == 2
    assert kinds.count("chosen") - kinds.count("left out") == 21 - 2 - 18


def test_kept_bridging_wells_and_controls_count_toward_those_that_are_asked(view, offered):
    _, path = offered
    rows = [r for r in table(path) if r["role"] != "blank"]
    rows.remove(next(r for r in rows if r["role"] == "bridge"))
    plan = muntin.propose(view, wells=8, keep=saved(path, rows))
    count = plan.wells["role"].value_counts().to_dict()
    assert count == {"test": 8, "bridge": 4, "blank": 2, "load": 4, "no_resin": 2}


def test_new_wells_do_not_repeat_what_the_locked_ones_tell(view):
    # Locking the first choices of a plan, the rest follows as it would have.
    plan = muntin.propose(changed(view, plan={"bridging_wells": 0}), wells=6)
    order = plan.wells.sort_index()
    first = order[order["role"] == "test"].head(3)
    path = view.study.folder / "mine.csv"
    first[["well", "role", "ph", "salt"]].to_csv(path, index=False)
    again = muntin.propose(changed(view, plan={"bridging_wells": 0}), wells=6, keep=path)
    tests = again.wells.sort_index().query("role == 'test'")
    assert tests[["ph", "salt"]].values.tolist() == (
        order[order["role"] == "test"][["ph", "salt"]].values.tolist()
    )


def test_conditions_taken_out_do_not_come_back(view, offered):
    _, path = offered
    rows = table(path)
    tests = first_tests(rows, 6)
    for row in tests:
        row["exclude"] = "turbid at the bench"
    out = {(float(r["ph"]), float(r["salt"])) for r in tests}
    again = muntin.propose(view, wells=6, keep=saved(path, rows))
    new = again.wells[again.wells["role"] == "test"]
    assert len(new) == 6
    assert not out & set(zip(new["ph"], new["salt"], strict=True))


def test_rows_that_are_merely_gone_may_come_back_and_that_is_told(view, offered):
    _, path = offered
    rows = table(path)
    gone = {(float(r["ph"]), float(r["salt"])) for r in first_tests(rows, 6)}
    rows = [row for row in rows if row["role"] != "test"]
    again = muntin.propose(view, wells=6, keep=saved(path, rows))
    new = again.wells[again.wells["role"] == "test"]
    back = len(gone & set(zip(new["ph"], new["salt"], strict=True)))
    assert back == len(gone)
    word = "condition" if back == 1 else "conditions"
    assert (
        f"{back} {word} that you took out chosen again: leave such a row in the plan with a reason "
        "in exclude, and it is not"
    ) in again.notices


def test_held_conditions_get_their_repeats(view):
    path = view.study.folder / "mine.csv"
    path.write_text("well,role,ph,salt\nC3,test,6.5,150\n")
    repeated = changed(view, plan={"bridging_wells": 0, "repeats_min": 3})
    plan = muntin.propose(repeated, wells=6, keep=path)
    tests = plan.wells[plan.wells["role"] == "test"]
    counts = tests.groupby(["ph", "salt"]).size()
    assert counts[(6.5, 150)] >= 3
    assert (counts >= 3).all()
    alone = muntin.propose(repeated, keep=path)
    assert "1 kept condition with fewer than 3 wells" in alone.notices


def test_rows_without_a_well_are_given_one(view, offered):
    _, path = offered
    rows = table(path)
    one = first_tests(rows, 1)[0]
    one["well"] = ""
    again = muntin.propose(view, keep=saved(path, rows))
    assert again.wells["well"].is_unique
    assert (again.wells["well"] != "").all()
    assert again.edit.changes == ()
    rows += [{"role": "test", "ph": ph, "salt": "50"} for ph in ("5.0", "7.5")]
    more = muntin.propose(view, keep=saved(path, rows))
    kept = by_well(more)
    for told in more.edit.changes:
        now = told.change.now
        assert tuple(kept.loc[now.well, ["ph", "salt"]]) == now.condition
        assert told.p_now == kept.loc[now.well, "p_now"]
    assert [told.change.kind for told in more.edit.changes] == ["added", "added"]


def test_own_columns_stay(view, offered):
    _, path = offered
    rows = table(path)
    for row in rows:
        row["bottle"] = "left" if row["role"] == "test" else ""
    plan = muntin.propose(view, wells=8, keep=saved(path, rows))
    assert list(plan.wells.columns)[-1] == "bottle"
    assert (plan.wells["bottle"] == "left").sum() == 6
    text = plan_table_text(view.study.definition, plan)
    assert text.splitlines()[0].endswith("p_now,reason,bottle")
    assert sum(line.endswith(",left") for line in text.splitlines()) == 6


def test_a_table_written_from_an_edit_is_read_again_without_a_change(view, offered):
    _, path = offered
    rows = table(path)
    first_tests(rows, 1)[0] |= {"ph": "5.0", "salt": "450", "reason": "the site asks for it"}
    first = muntin.propose(view, keep=saved(path, rows))
    text = plan_table_text(view.study.definition, first)
    write_plan(view.study.folder, "plate-03", text)
    second = muntin.propose(view, keep=view.study.folder / "plans" / "plate-03.r2.csv")
    assert second.edit.changes == ()
    assert plan_table_text(view.study.definition, second) == text


# Stocks that measured something else.


@pytest.fixture
def stock(view):
    path = view.study.folder / "stocks" / "plate-03.csv"
    path.parent.mkdir(exist_ok=True)
    path.write_text("factor,target,measured\nph,6.0,6.31\nph,4.5,4.5\n")
    yield path
    path.unlink()


def test_a_measured_stock_moves_the_plan(view, offered, stock):
    _, path = offered
    rows = table(path)
    one, two = first_tests(rows, 2)
    one |= {"ph": "6.0", "salt": "200", "reason": ""}
    two |= {"ph": "6.0", "salt": "200", "reason": "", "ph_measured": "5.9"}
    plan = muntin.propose(view, keep=saved(path, rows))
    kept = by_well(plan)
    for row, ph in ((one, 6.31), (two, 5.9)):
        asked = pd.DataFrame({"ph": [ph], "salt": [200.0]})
        told = kept.loc[row["well"]]
        assert told["p_now"] == pytest.approx(view.at(asked)["p_well"].iloc[0], rel=1e-9)
        assert told["ph"] == 6.0
        assert told["reason"].endswith(f"; pH measured {ph}")
    assert kept.loc[two["well"], "ph_measured"] == "5.9"
    said = [n for n in plan.notices if "stocks/plate-03.csv" in n]
    assert said[0].startswith("pH 6.0 measured 6.31 (stocks/plate-03.csv): probabilities and")


def test_new_wells_are_chosen_at_measured_values_too(view, stock):
    only = changed(view, factors=[{**PH, "plan_low": 6.0, "plan_high": 6.0}, SALT])
    plan = muntin.propose(only, wells=5)
    tests = plan.wells[plan.wells["role"] == "test"]
    assert set(tests["ph"]) == {6.0}
    moved = view.at(tests.assign(ph=6.31))["p_well"]
    np.testing.assert_allclose(tests["p_now"], moved, rtol=1e-8)
    assert tests["reason"].str.endswith("; pH measured 6.31").all()


def test_the_forecast_is_of_the_measured_value(view, stock):
    # A stock at 6.4 in place of 4.5 lies near the edge, where the well tells more.
    path = view.study.folder / "mine.csv"
    path.write_text("well,role,ph,salt\nC3,test,4.5,200\n")
    without = muntin.propose(view, keep=path).wrong_share
    stock.write_text("factor,target,measured\nph,4.5,6.4\n")
    near = muntin.propose(view, keep=path).wrong_share
    assert near < without


def test_faulty_stocks_are_told_with_the_faults_of_the_plan(view, stock):
    stock.write_text("factor,target,measured\nph,6.0,9.5\nhp,6.0,6.0\n")
    path = view.study.folder / "mine.csv"
    path.write_text("well,role,ph,salt\nZ3,test,6.2,200\n")
    with pytest.raises(StudyFaults) as found:
        muntin.propose(view, wells=200, keep=path)
    lines = found.value.lines()
    for said in ('"hp" is not a factor', "9.5 lies outside", '"Z3" is not', "6.2 is not", "200 is"):
        assert sum(said in line for line in lines) == 1
    with pytest.raises(StudyFaults) as found:
        muntin.propose(view, wells=5)
    assert len(found.value.faults) == 2


# Room and protein.


def refused(view, path, **asked):
    with pytest.raises(StudyFaults) as found:
        muntin.propose(view, keep=path, **asked)
    return found.value.lines()


def test_fewer_wells_than_are_kept(view, offered):
    _, path = offered
    assert refused(view, path, wells=4) == [
        "wells: 4 is fewer than the test wells that are kept; ask for 6, or take rows out"
    ]


def test_what_is_kept_takes_no_room_twice(view, offered):
    _, path = offered
    assert refused(view, path, wells=85) == [
        "wells: 85 is more than the plate has room for; ask for 84 (96 wells are free; "
        "4 bridging wells and 8 controls come on top)"
    ]


def test_a_plan_without_test_wells(view, offered):
    _, path = offered
    saved(path, [row for row in table(path) if row["role"] != "test"])
    (line,) = refused(view, path)
    assert line.endswith("holds no test well; keep one, or ask for new ones with --wells")


def test_protein_of_a_kept_plan(view, offered):
    # 24 wells were run; of 9.5 mg 3.5 are left, of which 6 + 4 + 6 wells need 4.
    _, path = offered
    scarce = changed(view, protein={"available_mg": 9.5, "per_well_mg": 0.25})
    (line,) = refused(scarce, path)
    assert line.endswith("needs 4 mg of protein; 3.5 mg are left beyond the reserve")
    (line,) = refused(scarce, path, wells=8)
    assert line.startswith("wells: 8 is more than the protein allows; ask for ")
    enough = changed(view, protein={"available_mg": 10.0, "per_well_mg": 0.25})
    assert muntin.propose(enough, keep=path).protein_mg == 4.0
    assert refused(enough, path, wells=7)[0].startswith(
        "wells: 7 is more than the protein allows; ask for 6"
    )


def test_a_plate_fed_by_rows_grows_around_fixed_wells(view):
    rows = changed(view, factors=[{**PH, "per_plate": 3}, SALT], plan={"prepared_by": "row"})
    path = view.study.folder / "mine.csv"
    path.write_text("well,role,ph,salt\nC3,test,6.5,150\nC7,test,6.5,200\nF1,test,5.5,400\n")
    plan = muntin.propose(rows, wells=14, keep=path)
    told = plan.wells.dropna(subset=["p_now"])
    assert (told.groupby(told["well"].str[0])["ph"].nunique() == 1).all()
    assert told["ph"].nunique() <= 3
    kept = by_well(plan)
    assert [kept.loc[w, "ph"] for w in ("C3", "C7", "F1")] == [6.5, 6.5, 5.5]


# An opening plate.


def test_an_opening_plate_may_be_edited(tmp_path):
    fresh = muntin.assess(written(tmp_path / "study"), "quadratic")
    plan = muntin.propose(fresh, wells=8)
    path, _ = write_plan(
        fresh.study.folder, plan.plate, plan_table_text(fresh.study.definition, plan)
    )
    rows = table(path)
    first_tests(rows, 1)[0] |= {"ph": "5.5", "salt": "150"}
    again = muntin.propose(fresh, wells=10, keep=saved(path, rows))
    assert (again.wells["role"] == "test").sum() == 10
    assert (again.wells["reason"] == "set by hand").sum() == 1
    assert again.forecast["wrong_share"][1:].isna().all()
    assert again.edit.offered_share is None


def test_choices_in_an_edited_plan(tmp_path):
    factors = [PH, RESIN]
    study = written(tmp_path / "study", [read(spread(factors, 14))], factors=factors)
    view = muntin.assess(study, "quadratic")
    path = study.folder / "mine.csv"
    path.write_text("well,ph,resin\nB2,5.5,beta\nB3,6.0,Gamma\n")
    plan = muntin.propose(view, wells=5, keep=path)
    kept = by_well(plan)
    assert (kept.loc["B2", "resin"], kept.loc["B3", "resin"]) == ("Beta", "Gamma")


def test_loads_in_an_edited_plan(tmp_path):
    # Loads of 5 and 40 mg/mL on 20 µL take 0.1 and 0.8 mg.
    factors = [PH, LOAD]
    protein = {"available_mg": 30.0, "load_factor": "load", "resin_ul": 20, "per_well_mg": 0.1}
    study = written(
        tmp_path / "study",
        [read(spread(factors, 14))],
        factors=factors,
        protein=protein,
        responses=[RECOVERY],
    )
    view = muntin.assess(study, "quadratic")
    path = study.folder / "mine.csv"
    path.write_text("well,ph,load\nB2,5.5,5\nB3,6.0,40\n")
    plan = muntin.propose(view, keep=path)
    assert plan.protein_mg == pytest.approx(0.9)
    # Wells beyond the plan take what its own take on average.
    mg = plan.forecast.set_index("wells")["mg"]
    assert mg[[0, 2, 6, 12]].tolist() == pytest.approx([0.0, 0.9, 2.7, 5.4])
