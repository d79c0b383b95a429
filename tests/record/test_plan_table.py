"""An edited plan: every fault of it at once, each with its address and what is allowed."""

import numpy as np
import pandas as pd
import pytest

from muntin.record.faults import Findings
from muntin.record.plan_table import read_plan
from muntin.record.stocks import planned_stocks
from tests.studies import PH, RECOVERY, RESIN, SALT, spread, written

RAN = pd.DataFrame(
    {"ph": [5.0, 6.0, 7.0], "salt": [100, 200, 400], "recovery": [0.2, 0.6, 0.9], "exclude": ""}
)
HEAD = "well,role,ph,salt,recovery,exclude,p_now,reason"
FILE = "plans/plate-02.csv"


def reading(tmp_path, *lines, head=HEAD, file=FILE, plates=(RAN,), stocks="", **given):
    """The kept plan and the faults of a plan of these lines, one text each."""
    study = written(tmp_path / "study", plates, **given)
    path = study.folder / file
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text("\n".join([head, *lines]) + "\n")
    if stocks:
        (study.folder / "stocks").mkdir()
        (study.folder / "stocks" / "plate-02.csv").write_text(stocks)
    found = Findings()
    made = planned_stocks(study.folder, study.definition, "plate-02", found)
    kept = read_plan(path, study, "plate-02", made, found)
    return kept, [fault.text for fault in found.faults]


def faults(tmp_path, *lines, **given):
    return reading(tmp_path, *lines, **given)[1]


def test_a_sound_plan_is_read(tmp_path):
    kept, told = reading(
        tmp_path,
        "C4,test,5.5,150,,,0.4,mine",
        "D5,bridge,6.0,200,,,0.6,",
        ",,7.0,450,,,,",
        "a01,blank,,,,,,",
        "E6,test,5.0,50,,precipitates at once,0.1,offered",
    )
    assert told == []
    assert kept.file == FILE
    assert list(kept.rows["well"]) == ["C4", "D5", "", "A1"]
    assert list(kept.rows["role"]) == ["test", "bridge", "test", "blank"]
    np.testing.assert_array_equal(kept.rows["ph"], [5.5, 6.0, 7.0, np.nan])
    assert list(kept.rows["reason"]) == ["mine", "", "", ""]
    assert kept.rows[["ph_measured", "salt_measured"]].isna().all(axis=None)
    assert kept.left_out[["well", "ph", "salt", "exclude"]].values.tolist() == [
        ["E6", 5.0, 50.0, "precipitates at once"]
    ]
    assert (kept.count("test"), kept.count("bridge")) == (2, 1)


def test_own_columns_and_measured_values_are_kept_as_they_stand(tmp_path):
    kept, told = reading(
        tmp_path,
        "C4,test,5.5,150,5.62,left",
        "D5,test,6.0,200,,right",
        head="well,role,ph,salt,ph_measured,bottle",
    )
    assert told == []
    np.testing.assert_array_equal(kept.rows["ph_measured"], [5.62, np.nan])
    assert kept.cells.to_dict("list") == {"ph_measured": ["5.62", ""], "bottle": ["left", "right"]}


def test_the_stock_tells_what_was_measured(tmp_path):
    kept, told = reading(
        tmp_path,
        "C4,test,5.5,150",
        "D5,test,6.0,200",
        head="well,role,ph,salt",
        stocks="factor,target,measured\nph,5.5,5.71\n",
    )
    assert told == []
    np.testing.assert_array_equal(kept.rows["ph_measured"], [5.71, np.nan])
    assert kept.cells.empty


PLAN = {"free_wells": "A1:D12"}
LIMITS = [{"allow": "salt <= 700 - 60 * ph"}]
BARRED = [{"conditions": "salt >= 300 and ph < 5", "because": "it precipitates"}]


@pytest.mark.parametrize(
    ("line", "said"),
    [
        ("Z9,test,5.5,150", 'column well: "Z9" is not a well of a 96-well plate (A1 to H12, or'),
        ("E1,test,5.5,150", 'column well: "E1" is not free; free are A1:D12 (study.toml, plan, '),
        ("A1,tset,5.5,150", 'column role: "tset" is not a role (did you mean "test"?)'),
        ("A1,test,5.6,150", "column ph: 5.6 is not on a bench step; nearest is 5.5 (study.toml, "),
        ("A1,test,4.6,150", "column ph: 4.6 is not on a bench step; nearest is 4.5 (study.toml, "),
        ("A1,test,8.5,150", "column ph: 8.5 lies outside 4.5 to 7.5 (study.toml, factors, ph)"),
        ("A1,test,5.5,", "column salt: is empty; the well needs its value"),
        ("A1,test,5.5,some", 'column salt: "some" is not a number'),
        ("A1,test,5.5,450", "column salt: 450 lies outside new plans, 50 to 400 mM (study.toml, "),
        (
            "A1,test,7.0,300",
            'ph 7.0, salt 300 breaks "salt <= 700 - 60 * ph" (study.toml, limits 1; nearest that '
            "may be run: ph 7.0, salt 250)",
        ),
        (
            "A1,test,4.5,300",
            'ph 4.5, salt 300 is forbidden: "salt >= 300 and ph < 5" (study.toml, forbidden 1: it '
            "precipitates; nearest that may be run: ph 4.5, salt 250)",
        ),
        (
            "A1,bridge,5.5,150",
            'column role: "bridge" is a bridging well, but no well read so far has ph 5.5, salt '
            "150; call it test or reference (take a condition that was run)",
        ),
    ],
)
def test_one_fault_of_one_cell(tmp_path, line, said):
    told = faults(
        tmp_path,
        line,
        head="well,role,ph,salt",
        factors=[PH, {**SALT, "plan_high": 400}],
        plan=PLAN,
        limits=LIMITS,
        forbidden=BARRED,
    )
    assert len(told) == 1
    assert told[0].startswith(f"{FILE}, row 2")
    assert said in told[0]


def test_a_reading_says_that_the_plate_was_run(tmp_path):
    (told,) = faults(tmp_path, "A1,test,5.5,150,0.71,,,")
    assert told == (
        f"{FILE}, row 2, well A1, column recovery: 0.71 is a reading; a plate that was run belongs "
        "in plates/"
    )


def test_choices(tmp_path):
    ran = spread([PH, RESIN], 3).assign(recovery=0.5)
    told = faults(
        tmp_path,
        "A1,test,5.5,Alfa",
        "A2,test,5.5,Gamma",
        "A3,test,5.5,beta",
        head="well,role,ph,resin",
        plates=(ran,),
        factors=[PH, {**RESIN, "plan_choices": ["Alpha", "Beta"]}],
    )
    assert len(told) == 2
    assert 'row 2, well A1, column resin: "Alfa" is not a choice (did you mean "Alpha"?)' in told[0]
    assert 'row 3, well A2, column resin: "Gamma" is not a choice of new plans' in told[1]


def test_a_well_twice(tmp_path):
    (told,) = faults(tmp_path, "A1,test,5.5,150,,,,", "A01,blank,,,,,,")
    assert told == f'{FILE}, row 3, column well: "A01" is already in row 2'


def test_a_row_left_out_takes_no_well_and_breaks_nothing(tmp_path):
    kept, told = reading(tmp_path, "A1,test,5.63,9999,,too salty for us,,", "A1,test,5.5,150,,,,")
    assert told == []
    assert len(kept.rows) == len(kept.left_out) == 1


def test_more_levels_than_a_plate_may_hold(tmp_path):
    rows = [f"A{i},test,{ph},150,,,," for i, ph in enumerate((5.0, 5.0, 6.0, 7.0), start=1)]
    (told,) = faults(tmp_path, *rows, factors=[{**PH, "per_plate": 2}, SALT])
    assert told == (
        f"{FILE}, column ph: 5.0, 6.0, 7.0 are 3 levels; per_plate allows 2 (study.toml, factors, "
        "ph; fewest wells have 6.0)"
    )


@pytest.mark.parametrize(
    ("by", "wells", "line"), [("row", ("C1", "C9"), "row"), ("column", ("C1", "H1"), "column")]
)
def test_two_stocks_on_a_line(tmp_path, by, wells, line):
    rows = [f"{w},test,{ph},150,,,," for w, ph in zip(wells, (5.0, 6.0), strict=True)]
    (told,) = faults(tmp_path, *rows, f"{wells[0][0]}5,blank,,,,,,", plan={"prepared_by": by})
    assert f"lies on the {line} of C1, which is fed ph 5.0; move it to another {line}" in told
    assert faults(tmp_path, *rows, plan={"prepared_by": "well"}) == []


def test_a_plan_of_a_plate_that_was_run(tmp_path):
    for file in ("plans/plate-01.csv", "plans/plate-01.r3.csv"):
        (told,) = faults(tmp_path, "A1,test,5.5,150,,,,", file=file)
        assert told == (
            f"{file}: is of plate-01, which was run; the next plate is plate-02 (copy it to "
            "plans/plate-02.csv and edit it there)"
        )


def test_no_such_file_and_no_table(tmp_path):
    study = written(tmp_path / "study", [RAN])
    for name, said in (("none.csv", "there is no such file"), ("empty.csv", "is empty; its first")):
        path, found = study.folder / name, Findings()
        if name == "empty.csv":
            path.write_text("")
        assert read_plan(path, study, "plate-02", (), found) is None
        assert said in found.faults[0].text


def test_a_missing_factor(tmp_path):
    told = faults(tmp_path, "A1,test,5.5", head="well,role,ph")
    assert told == [f"{FILE}: has no column salt"]


def test_all_faults_come_in_one_report(tmp_path):
    told = faults(
        tmp_path,
        "Z9,test,5.63,150,0.5,,,",
        "A1,tset,9,150,,x,,",
        "A1,bridge,5.5,50,,,,",
        responses=[RECOVERY],
    )
    for said in ("Z9", "5.63", "is a reading", "tset", "is not a reason", "bridging well"):
        assert sum(said in line for line in told) == 1
