"""`muntin report` as it is run: what it prints, writes and returns."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from typer.testing import CliRunner, Result

from muntin.cli import app
from tests.report.parsed import parsed
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
