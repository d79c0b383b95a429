"""How wells that were run did."""

from __future__ import annotations

from pathlib import Path

from muntin.record import open_study
from muntin.report.verdicts import verdicts
from tests.report.studies import ONE_FACTOR, write

PLATE = """\
well,role,salt,recovery,hcp,exclude
A1,test,0,0.9,50,
A2,test,50,0.9,200,
A3,test,100,0.9,50,
A4,test,100,0.7,50,
A5,test,150,0.9,,
A6,test,200,0.7,,
A7,test,250,,,
A8,test,300,0.9,50,leaked over the neighbour
A9,bridge,0,0.8,100,
B1,blank,,0.01,,
"""


def test_each_condition_gets_one_verdict(tmp_path: Path) -> None:
    study = open_study(write(tmp_path, {"study.toml": ONE_FACTOR, "plates/plate-01.csv": PLATE}))
    table = verdicts(study).set_index("salt")
    assert table["verdict"].to_dict() == {
        0: "passed",
        50: "failed",
        100: "between",
        150: "passed",
        200: "failed",
        250: "awaited",
    }
    assert table["wells"].to_dict() == {0: 2, 50: 1, 100: 2, 150: 1, 200: 1, 250: 1}


def test_nothing_run_gives_an_empty_table(tmp_path: Path) -> None:
    table = verdicts(open_study(write(tmp_path, {"study.toml": ONE_FACTOR})))
    assert (len(table), list(table)) == (0, ["salt", "wells", "verdict"])
