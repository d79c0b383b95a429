"""`muntin prepare`: what it prints, writes and returns."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from muntin.record.ledger import LEDGER
from tests.bench.bottled import HIGH, LOW, ROWS, bottled, write_plan
from tests.report.studies import tree
from tests.test_cli import rows_of, run

SCREEN = """\
plans/plate-02.csv, 7 wells: 3 test, 1 bridging, 1 blank, 1 load, 1 no resin.

stock               wells  drawn, µL  stays behind  have at least
load                    6        750          1 mL        1.75 mL
low salt (pH 4.5)       1        360          1 mL        1.36 mL
high salt (pH 4.5)      1         40          1 mL        1.04 mL
low salt (pH 5.0)       3        720          1 mL        1.72 mL
high salt (pH 5.0)      3        480          1 mL        1.48 mL

14 draws, the smallest 40 µL.
Protein: the wells take 1.5 mg, 2 mg stay in the trough; before it 27 mg are left beyond the reserve
of 10 mg.
No buffers are given (study.toml, [[bench.buffers]]): how the bottles are made is not in these
sheets.
No control_condition is given (study.toml, [bench]): what blanks and wells without resin get besides
the load is not in these sheets (D5, F7).
Binding, wash and strip buffers, what blanks get in place of the load, and the steps on the resin
plate (equilibrate, wash, elute from the mixing plate, strip) are those of your procedure.
Development aid, not for release decisions. Site procedures and licensed practice come first; this
list replaces neither, nor the safety data sheets.
All cautions stand on the checklist.
"""
FILES = [
    "sheets/plate-02/checklist.pdf",
    "sheets/plate-02/checklist.txt",
    "sheets/plate-02/conditions.csv",
    "sheets/plate-02/map.pdf",
    "sheets/plate-02/map.png",
    "sheets/plate-02/recipes.csv",
    "sheets/plate-02/stocks.csv",
    "sheets/plate-02/totals.csv",
    "sheets/plate-02/transfers.csv",
]


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return bottled(tmp_path / "study")


def test_the_screen_and_the_files(study: Path) -> None:
    before = tree(study)
    result = run("prepare", study)
    assert result.exit_code == 0, result.stderr
    assert result.stdout.startswith(SCREEN)
    after = tree(study)
    assert sorted(set(after) - set(before)) == [LEDGER, *FILES]
    assert {name: after[name] for name in before} == before
    assert "Replaces" not in result.stdout
    assert "Replaces the sheets that were there." in run("prepare", study).stdout
    again = tree(study)
    assert again.pop(LEDGER).startswith(after.pop(LEDGER))
    assert again == after


def test_json_is_one_document_that_adds_up(study: Path) -> None:
    facts = json.loads(run("prepare", study, "--json").stdout)
    assert (facts["command"], facts["plate"]) == ("prepare", "plate-02")
    assert facts["plan"]["file"] == "plans/plate-02.csv"
    for total in facts["totals"]:
        drawn = [t["draw_ul"] for t in facts["transfers"] if t["stock"] == total["stock"]]
        assert sum(drawn) == total["drawn_ul"]
    for recipe in facts["recipes"]:
        assert sum(recipe["draw_ul"].values()) == 400
        assert sum(recipe["shares"].values()) == pytest.approx(1.0)
    assert facts["protein"] == {
        "needed_mg": 1.5,
        "left_mg": 27.0,
        "measured_mg": 1.5,
        "dead_mg": 2.0,
    }
    table = rows_of(study / "sheets" / "plate-02" / "transfers.csv")
    assert [(r["stock"], r["well"], float(r["draw_ul"])) for r in table] == [
        (t["stock"], t["well"], t["draw_ul"]) for t in facts["transfers"]
    ]


def test_quiet_writes_and_says_nothing(study: Path) -> None:
    result = run("prepare", study, "--quiet")
    assert (result.stdout, result.stderr, result.exit_code) == ("", "", 0)
    assert (study / "sheets" / "plate-02" / "map.pdf").is_file()


@pytest.mark.parametrize("name", ["plate-02.r2", "plans/plate-02.r2.csv", "file"])
def test_a_plan_by_name_has_sheets_of_that_name(study: Path, name: str) -> None:
    path = write_plan(study, ROWS[:1], "plate-02.r2.csv")
    facts = json.loads(run("prepare", study, path if name == "file" else name, "--json").stdout)
    assert facts["plan"]["file"] == "plans/plate-02.r2.csv"
    assert (study / "sheets" / "plate-02.r2" / "map.png").is_file()
    assert not (study / "sheets" / "plate-02").exists()


def test_an_edited_plan_is_taken_as_it_stands(study: Path) -> None:
    write_plan(study, [("G7", "test", 7.0, 350)])
    facts = json.loads(run("prepare", study, "--json").stdout)
    (recipe,) = facts["recipes"]
    assert recipe["condition"] == {"ph": 7.0, "salt": 350.0}
    assert recipe["draw_ul"] == {"low salt (pH 7.0)": 120.0, "high salt (pH 7.0)": 280.0}
    assert recipe["wells"] == ["G7"]


@pytest.mark.parametrize("as_json", [False, True])
def test_faults_write_nothing(study: Path, as_json: bool) -> None:
    bottled(study, stocks=[LOW, {**HIGH, "holds": {"salt": 300}}])
    before = tree(study)
    result = run("prepare", study, *(["--json"] if as_json else []))
    assert result.exit_code == 2
    said = (
        "plans/plate-02.csv, well A2: ph 5.0, salt 400 is out of reach: the bottles for it hold "
        "salt 0 to 300 (nearest that works: ph 5.0, salt 300)\n"
    )
    assert result.stderr == said
    if as_json:
        (fault,) = json.loads(result.stdout)["faults"]
        assert fault["text"] == said.strip()
    else:
        assert result.stdout == ""
    assert tree(study) == before


def test_no_plan_and_no_such_plan(study: Path) -> None:
    result = run("prepare", study, "plate-2")
    assert (result.exit_code, result.stderr) == (
        2,
        'plate-2: there is no such plan (did you mean "plate-02"?)\n',
    )
    (study / "plans" / "plate-02.csv").unlink()
    result = run("prepare", study)
    assert (result.exit_code, result.stderr) == (
        2,
        "plans: holds no plan of plate-02 (muntin propose writes one)\n",
    )


def test_a_plate_that_was_run_is_no_plan(study: Path) -> None:
    write_plan(study, ROWS, "plate-01.csv")
    result = run("prepare", study, "plate-01")
    assert result.exit_code == 2
    assert "is of plate-01, which was run; the next plate is plate-02" in result.stderr
