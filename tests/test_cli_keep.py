"""`muntin propose --keep` and what `check` says of it: files, screens, faults."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import pytest

from muntin.record.edits import recorded_edits
from muntin.record.ledger import LEDGER
from tests.report.studies import small, tree
from tests.test_cli import rows_of, run

QUICK = ("--surrogate", "quadratic")


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A study with an offered plan of five test wells."""
    folder = small(tmp_path / "study")
    assert run("propose", folder, "--wells", 5, *QUICK).exit_code == 0
    return folder


def edited(study: Path, name: str = "plate-02.csv") -> tuple[Path, list[dict[str, str]]]:
    """The offered plan with its first test well at another salt, and the rows as they were."""
    path = study / "plans" / name
    rows = rows_of(path)
    changed = [dict(row) for row in rows]
    first = next(row for row in changed if row["role"] == "test")
    first["salt"] = "100" if first["salt"] != "100" else "150"
    saved(path, changed)
    return path, rows


def saved(path: Path, rows: list[dict[str, str]]) -> None:
    with path.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.DictWriter(stream, list(rows[0]))
        writer.writeheader()
        writer.writerows(rows)


def test_a_plan_is_offered_with_a_copy(study: Path) -> None:
    plan = study / "plans" / "plate-02.csv"
    assert plan.read_bytes() == (study / "plans" / "offered" / "plate-02.csv").read_bytes()


@pytest.mark.parametrize("keep", [False, True])
def test_settings_hold_the_test_wells_of_the_plan(study: Path, keep: bool) -> None:
    # The forecast goes on beyond them.
    asked = ("--keep", study / "plans" / "plate-02.csv") if keep else ("--wells", 5)
    facts = json.loads(run("propose", study, *asked, "--json", *QUICK).stdout)
    assert facts["plan"]["forecast"][-1]["wells"] > 5
    assert facts["settings"]["wells"] == 5


def test_an_edited_plan_is_written_beside_the_others(study: Path) -> None:
    path, _ = edited(study)
    before = tree(study)
    said = ("--by", "lab 2", "--because", "the column runs there")
    result = run("propose", study, "--keep", path, *said, *QUICK)
    assert result.exit_code == 0, result.stderr
    after = tree(study)
    assert after.pop(LEDGER).startswith(before.pop(LEDGER))
    # Nothing that was there is changed; the plan, its copy and its record are new.
    assert {name: after[name] for name in before} == before
    new = sorted(set(after) - set(before))
    assert new == [
        "plans/offered/plate-02.r2.csv",
        "plans/plate-02.r2.csv",
        "plans/plate-02.r2.edit.toml",
    ]
    assert after["plans/offered/plate-02.r2.csv"] == after["plans/plate-02.r2.csv"]
    (record,) = recorded_edits(study)
    assert record.notices == ()
    assert record.record is not None
    told = record.record
    assert (told.by, told.because, told.wells) == ("lab 2", "the column runs there", 5)
    assert (told.kept, told.offered) == ("plans/plate-02.csv", "plans/offered/plate-02.csv")
    assert [change.kind for change in told.changes] == ["changed"]
    assert set(told.inputs) == {"study.toml", "plates/plate-01.csv"}
    assert told.offered_wrong_share is not None
    assert "Edited    Against plans/offered/plate-02.csv: 1 changed." in result.stdout
    assert "Rename it to plate-02.csv when you move it to plates/." in result.stdout


def test_check_tells_of_edits(study: Path) -> None:
    path, _ = edited(study)
    run("propose", study, "--keep", path, "--because", "the column runs there", *QUICK)
    screen = " ".join(run("check", study).stdout.split())
    assert (
        "Plans plans/plate-02.r2.csv: 1 changed against plans/offered/plate-02.csv: "
        '"the column runs there"'
    ) in screen
    facts = json.loads(run("check", study, "--json").stdout)
    (edit,) = facts["plans"]["edits"]
    assert edit["because"] == "the column runs there"
    assert facts["plans"]["run"] == []


@pytest.mark.parametrize("how", ["as planned", "otherwise"])
def test_check_compares_the_plate_that_was_run_with_its_plan(study: Path, how: str) -> None:
    rows = rows_of(study / "plans" / "plate-02.csv")
    filled = [{**row, "recovery": "0.5"} if row["ph"] else row for row in rows]
    tests = [row for row in filled if row["role"] == "test"]
    if how == "otherwise":
        tests[0]["salt"] = "100" if tests[0]["salt"] != "100" else "150"
        filled.remove(tests[1])
    saved(study / "plates" / "plate-02.csv", filled)
    screen = " ".join(run("check", study).stdout.split())
    if how == "as planned":
        assert "plate-02 was run as planned in plans/offered/plate-02.csv" in screen
    else:
        assert (
            "plate-02 was run otherwise than planned in plans/offered/plate-02.csv: 1 changed "
            f"({tests[0]['well']}), 1 not run ({tests[1]['well']})"
        ) in screen
    (facts,) = json.loads(run("check", study, "--json").stdout)["plans"]["run"]
    assert (facts["plate"], len(facts["changes"])) == ("plate-02", 0 if how == "as planned" else 2)


def test_a_plate_without_a_plan_is_not_compared(study: Path) -> None:
    assert "Plans" not in run("check", study).stdout


def test_wells_are_added_to_those_that_are_kept(study: Path) -> None:
    path, _ = edited(study)
    result = run("propose", study, "--keep", path, "--wells", 8, "--json", *QUICK)
    facts = json.loads(result.stdout)
    assert facts["settings"]["wells"] == 8
    kinds = [change["kind"] for change in facts["plan"]["edit"]["changes"]]
    assert kinds == ["changed", "chosen", "chosen", "chosen"]
    rows = rows_of(Path(facts["files"]["plan"]))
    assert sum(row["role"] == "test" for row in rows) == 8
    assert Path(facts["files"]["record"]).is_file()


def test_the_same_edit_gives_the_same_plan(study: Path) -> None:
    path, _ = edited(study)
    plans = []
    for _ in range(2):
        facts = json.loads(run("propose", study, "--keep", path, "--json", *QUICK).stdout)
        plans.append(Path(facts["files"]["plan"]))
    assert plans[0].name == "plate-02.r2.csv"
    assert plans[1].name == "plate-02.r3.csv"
    assert plans[0].read_bytes() == plans[1].read_bytes()


def test_all_faults_are_told_at_once_and_nothing_is_written(study: Path) -> None:
    path, rows = edited(study)
    tests = [row for row in rows if row["role"] == "test"]
    tests[0]["ph"] = "5.13"
    tests[1]["well"] = "K99"
    tests[2]["role"] = "tset"
    tests[3]["recovery"] = "0.5"
    saved(path, rows)
    before = tree(study)
    result = run("propose", study, "--keep", path, "--wells", 200, *QUICK)
    assert (result.exit_code, result.stdout) == (2, "")
    lines = result.stderr.splitlines()
    for said in (
        "5.13 is not on",
        '"K99"',
        '"tset"',
        "is a reading",
        "200 is more than plate and protein",
    ):
        assert sum(said in line for line in lines) == 1
    assert "Traceback" not in result.stderr
    assert tree(study) == before


def test_a_file_that_is_not_there(study: Path) -> None:
    before = tree(study)
    result = run("propose", study, "--keep", study / "plans" / "none.csv", *QUICK)
    assert (result.exit_code, result.stderr) == (2, "plans/none.csv: there is no such file\n")
    result = run("propose", study, "--keep", study / "plans")
    assert (result.exit_code, result.stderr) == (2, "plans: is a folder, not a plan\n")
    assert tree(study) == before


def test_words_on_an_edit_need_an_edited_plan(study: Path) -> None:
    before = tree(study)
    result = run("propose", study, "--by", "lab 2", "--because", "so", *QUICK)
    assert result.exit_code == 2
    assert result.stderr.splitlines() == [
        "muntin propose: --because tells of an edited plan; name it with --keep",
    ]
    assert tree(study) == before


def test_where_the_plan_cannot_be_written_nothing_is_left(
    study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    replace = Path.replace

    def refused(path: Path, target: Path) -> Path:
        if target.parent == study / "plans" and target.suffix == ".csv":
            raise PermissionError(13, "Permission denied", str(target))
        return replace(path, target)

    path, _ = edited(study)
    before = tree(study)
    monkeypatch.setattr(Path, "replace", refused)
    result = run("propose", study, "--keep", path, *QUICK)
    assert result.exit_code == 2
    assert "plans/plate-02.r2.csv: cannot be written (Permission denied)" in result.stderr
    assert tree(study) == before


def test_a_plan_kept_with_advice_is_an_offer_too(tmp_path: Path) -> None:
    folder = small(tmp_path / "study")
    assert run("advise", folder, "--wells", 4, *QUICK).exit_code == 0
    path, _ = edited(folder)
    facts = json.loads(run("propose", folder, "--keep", path, "--json", *QUICK).stdout)
    assert facts["plan"]["edit"]["offered"] == "advice/plate-02/r1/plan.csv"
    assert len(facts["plan"]["edit"]["changes"]) == 1


def test_the_same_edit_of_an_advised_plan_gives_the_same_plan(tmp_path: Path) -> None:
    folder = small(tmp_path / "study")
    run("advise", folder, "--wells", 4, *QUICK)
    path, _ = edited(folder)
    results = [run("propose", folder, "--keep", path, "--json", *QUICK) for _ in range(2)]
    first, second = (json.loads(result.stdout)["plan"] for result in results)
    assert first == second


def test_what_cannot_be_planned_is_told_before_the_fit(
    study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fitted(*_: object, **__: object) -> None:
        raise AssertionError("fitted first")

    monkeypatch.setattr("muntin.window.assessment.assess", fitted)
    result = run("propose", study, "--wells", 500)
    assert result.exit_code == 2
    assert "500" in result.stderr
    assert "fitted first" not in result.output
