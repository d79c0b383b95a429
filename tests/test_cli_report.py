"""`muntin report` as it is run: what it prints, writes and returns."""

from __future__ import annotations

import json
import os
import re
from pathlib import Path

import pytest
from typer.testing import CliRunner, Result

from muntin.cli import app
from muntin.record.ledger import read_ledger
from muntin.verify import verify
from tests.report.parsed import parsed, table_of
from tests.report.studies import STUDY, small, tree

PLAIN = STUDY.replace("kept_within = 0.1\n", "")


def run(*arguments: object) -> Result:
    return CliRunner().invoke(app, [str(argument) for argument in arguments])


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return small(tmp_path / "study", toml=PLAIN)


def test_it_has_help_and_the_common_options() -> None:
    result = run("report", "--help")
    assert result.exit_code == 0
    for option in ("--out", "--wells", "--json", "--seed", "--quiet"):
        assert option in result.stdout


def test_json_page_and_record_agree_and_the_same_seed_gives_the_same_numbers(
    study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    options = ("--surrogate", "quadratic", "--wells", 4, "--json")
    first = run("report", study, *options)
    assert first.exit_code == 0, first.stderr
    facts = json.loads(first.stdout)
    record = json.loads((study / "report" / "report.json").read_text())
    page = parsed((study / "report" / "report.html").read_text())
    assert record["answer"] == facts["answer"]
    assert [li.text for li in page.one("ol").every("li")] == facts["answer"]
    assert facts["files"][0] == str(study / "report" / "report.html")
    assert all(Path(path).is_file() for path in facts["files"])
    monkeypatch.setattr("muntin.report.page.build.report_figures", lambda view, plan: ())
    again = json.loads(run("report", study, *options).stdout)
    differ = {name for name in facts if facts[name] != again[name]}
    assert differ <= {"written_at", "files", "ledger"}
    assessed = json.loads(run("assess", study, "--surrogate", "quadratic", "--json").stdout)
    for part in ("window", "checks", "model", "handover", "study"):
        assert facts[part] == assessed[part]


@pytest.mark.parametrize("broken", ["study.toml", "report/report.html"])
def test_what_is_at_fault_ends_with_2_and_nothing_written(study: Path, broken: str) -> None:
    (study / "report").mkdir()
    (study / broken).write_text("mine")
    before = tree(study)
    result = run("report", study, "--quiet")
    assert result.exit_code == 2
    assert broken in result.stderr
    assert not result.stdout
    assert tree(study) == before


def test_a_study_that_cannot_be_written_is_told_before_anything_is_fitted(
    study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("muntin.window.assessment.assess", None)
    monkeypatch.setattr(os, "access", lambda path, mode: mode != os.W_OK or Path(path) != study)
    before = tree(study)
    result = run("report", study)
    said = f"{study}: cannot be written (name a place elsewhere with --out)\n"
    assert (result.exit_code, result.stderr) == (2, said)
    assert tree(study) == before


def test_the_page_and_its_line_are_written_together(study: Path) -> None:
    options = ("--surrogate", "quadratic", "--wells", 4, "--json")
    facts = json.loads(run("report", study, *options, "--by", "A. Tester").stdout)
    (line,) = read_ledger(study).sound
    entry = line.entry
    assert (entry.command, entry.by, entry.seed) == ("report", "A. Tester", 1)
    assert entry.inputs == facts["inputs"]
    assert {str(study / name) for name in entry.results} == set(facts["files"])
    assert entry.decision is not None
    assert entry.decision["verdict"] == facts["plan"]["verdict"]["word"]
    assert facts["ledger"] == {"line": 1, "before": ""}
    made = table_of(parsed((study / "report/report.html").read_text()), "How it was made")
    assert {"what": "written by", "value": "A. Tester"} in made
    assert verify(study).clean
    rest = study / "study.toml"
    rest.write_text(rest.read_text().replace("at_least = 0.8", "at_least = 0.7"))
    (said,) = verify(study).differs
    assert re.fullmatch(r"since muntin report of [-0-9]+: .*at_least: 0.8, now 0.7", said)
