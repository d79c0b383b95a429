"""`muntin reduce` as it is run: screen, files, exit codes, and what stays untouched."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

from muntin.record import open_study
from muntin.window.coded import priors_for
from tests.assay.studies import HEADING, READS, ROWS, write
from tests.test_cli import run


def files(folder: Path) -> dict[str, bytes]:
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in folder.rglob("*")
        if path.is_file()
    }


def test_what_is_written(tmp_path):
    study = write(tmp_path)
    before = files(study)
    result = run("reduce", study, study / "reads")
    assert result.exit_code == 0, result.output
    after = files(study)
    assert {name: after[name] for name in before} == before
    assert sorted(set(after) - set(before)) == [
        "ledger.jsonl",
        "reductions/plate-01-masses.csv",
        "reductions/plate-01-reads.csv",
        "reductions/plate-01.json",
        "results/reduced-plate-01.csv",
    ]
    lines = after["results/reduced-plate-01.csv"].decode().splitlines()
    assert lines[0] == "plate,well,recovery,recovery_sd"
    assert [line.split(",")[1:3] for line in lines[1:]] == [
        ["A1", "0.3333"],
        ["B2", "0.6000"],
        ["C3", "<0.0167"],
    ]
    record = json.loads(after["reductions/plate-01.json"])
    assert record["load"]["mg_ml"] == pytest.approx(2.0)
    assert record["settings"]["assay"]["extinction"] == 2.0
    assert record["settings"]["fixed"] == {
        "resin_ul": 40.0,
        "hold_up_ul": 20.0,
        "contact_minutes": None,
    }
    assert set(record["reads"]) == {"all.csv"}
    assert {"study.toml", "plates/plate-01.csv"} <= set(record["inputs"])
    assert record["shared"]["scale_error"] > 0.02


def test_the_study_reads_what_was_written_and_a_second_run_changes_nothing(tmp_path):
    study = write(tmp_path)
    run("reduce", study, "reads", "--quiet")
    study_read = open_study(study)
    assert study_read.notices == (
        "plate-01: 1 reading of recovery censored (< or >), used as such (C3)",
    )
    assert study_read.readings("recovery")["y"].tolist() == [0.3333, 0.6, 0.0167]
    once = files(study)
    assert run("reduce", study, "reads", "--quiet").output == ""
    again = files(study)
    assert again["ledger.jsonl"].startswith(once.pop("ledger.jsonl"))
    assert {name for name in once if once[name] != again.get(name)} <= {"reductions/plate-01.json"}
    assert again["results/reduced-plate-01.csv"] == once["results/reduced-plate-01.csv"]


def test_results_of_another_recovery_are_told_until_they_are_reduced_again(tmp_path):
    study = write(tmp_path)
    run("reduce", study, "reads", "--quiet")
    told = "results of plate-01 were reduced as collected_of_load; study.toml, [assay] now says"
    assert not any(told in notice for notice in open_study(study).notices)
    settings = study / "study.toml"
    settings.write_text(
        settings.read_text().replace("[assay]\n", '[assay]\nrecovery = "freed_of_bound"\n')
    )
    assert sum(told in notice for notice in open_study(study).notices) == 1
    again = run("reduce", study, "reads")
    assert again.exit_code == 0, again.output
    assert told not in again.output
    assert not any(told in notice for notice in open_study(study).notices)


def test_the_record_reduces_again_to_the_same(tmp_path):
    study = write(tmp_path)
    run("reduce", study, "reads", "--quiet")
    first = files(study)["results/reduced-plate-01.csv"]
    run("reduce", study, "reductions/plate-01-reads.csv", "--quiet")
    assert files(study)["results/reduced-plate-01.csv"] == first


def test_nothing_is_written_where_the_input_is_at_fault(tmp_path):
    study = write(tmp_path, reads=(HEADING, *READS, "A1,e1,280,dark,"))
    before = files(study)
    result = run("reduce", study, "reads", "--json")
    assert result.exit_code == 2
    assert files(study) == before
    faults = json.loads(result.stdout)["faults"]
    assert [fault["value"] for fault in faults] == ['"dark"']


def test_reads_that_are_not_there(tmp_path):
    study = write(tmp_path)
    result = run("reduce", study, "nowhere")
    assert result.exit_code == 2
    assert "nowhere: there is no such file or folder" in result.output


def test_facts_and_monte_carlo(tmp_path):
    study = write(tmp_path)
    facts = json.loads(run("reduce", study, "reads", "--json", "--monte-carlo", 3000).stdout)
    (plate,) = facts["plates"]
    assert [well["well"] for well in plate["wells"]] == ["A1", "B2", "C3"]
    assert plate["wells"][0]["collected_of_load"] == pytest.approx(1 / 3)
    record = json.loads((study / "reductions" / "plate-01.json").read_text())
    drawn = record["monte_carlo"]
    well = plate["wells"][0]
    total = (well["collected_of_load_sd"] ** 2 + well["collected_of_load_shared_sd"] ** 2) ** 0.5
    # 3,000 draws: a standard error of 1.3 % of the sd.
    assert drawn["standard_uncertainty"][0] == pytest.approx(total, rel=0.05)
    assert drawn["own_standard_uncertainty"][0] == pytest.approx(
        well["collected_of_load_sd"], rel=0.05
    )


def test_the_screen_says_what_matters(tmp_path):
    rows = list(ROWS)
    rows[2] = "B2,test,6,300,0.55"
    study = write(tmp_path, rows=rows)
    screen = run("reduce", study, "reads").output
    assert all(len(line) <= 100 for line in screen.splitlines())
    for said in (
        "14 reads on 1 plate, 3 wells reduced.",
        "eluates over load.",
        "It is in no recovery_sd.",
        "priors.scale_error = { median = 0.0",
        "plate-01, none for B2: its table holds 0.55, the reads give 0.6000.",
        "Flags take nothing out.",
    ):
        assert said in " ".join(screen.split()), said


def test_the_line_that_tells_the_model_is_a_prior_of_the_study(tmp_path):
    study = write(tmp_path)
    (line,) = re.findall(r"priors\.scale_error = .*\}", run("reduce", study, "reads").output)
    path = study / "study.toml"
    path.write_text(path.read_text().replace("[[responses]]\n", f"[[responses]]\n{line}\n"))
    facts = json.loads(run("reduce", study, "reads", "--json").stdout)
    opened = open_study(study)
    (response,) = opened.definition.responses
    prior = priors_for(opened, response).scale_error
    assert prior.median == pytest.approx(facts["scale_error"], abs=5e-4)
    assert "compare it" in run("reduce", study, "reads").output


def test_monte_carlo_is_compared_on_the_screen(tmp_path):
    study = write(tmp_path)
    assert "2000 Monte Carlo draws" in run("reduce", study, "reads", "--monte-carlo", 2000).output
    assert "Monte Carlo" not in run("reduce", study, "reads").output


def test_before_the_reads_are_reduced_check_says_what_is_next(tmp_path):
    study = write(tmp_path)
    checked = run("check", study)
    assert checked.exit_code == 0, checked.output
    assert (
        "recovery is awaited in 3 of 3 wells, in all of plate-01: muntin reduce DIR READS is next"
    ) in " ".join(checked.output.split())
    assessed = run("assess", study)
    assert assessed.exit_code == 2
    assert "(run muntin reduce DIR READS, fill in recovery, or keep a table" in assessed.output
    run("reduce", study, "reads", "--quiet")
    assert "is next" not in run("check", study).output


def test_the_plates_that_are_still_to_be_reduced_are_named(tmp_path):
    study = write(tmp_path)
    run("reduce", study, "reads", "--quiet")
    rows = [ROWS[0] + ",exclude", ROWS[1] + ",", ROWS[2] + ",dropped"]
    (study / "plates" / "plate-02.csv").write_text("\n".join(rows) + "\n")
    (told,) = (n for n in open_study(study).notices if "awaited" in n)
    assert told == (
        "recovery is awaited in 1 of 5 wells, in all of plate-02: muntin reduce DIR READS is next"
    )


def test_a_study_without_an_assay_needs_a_reading(tmp_path):
    study = write(tmp_path)
    settings = study / "study.toml"
    settings.write_text(settings.read_text().split("[assay]")[0])
    checked = run("check", study)
    assert checked.exit_code == 2
    assert "(fill in recovery, or keep a table in plans/ until it was run)" in checked.output
