"""The commands as they are run: what they print, write and return."""

from __future__ import annotations

import csv
import json
import shlex
import subprocess
import sys
from pathlib import Path

import pytest
from typer.testing import CliRunner, Result

from muntin.cli import app
from muntin.record import open_study
from tests.report.studies import ONE_FACTOR, STUDY, one_factor_plate, small, tree, write

CHECKED = """\
Small invented study
Read      1 plate, 12 wells, 0 controls. Recovery: 12 read.
Sound     No faults were found.
"""


def run(*arguments: object) -> Result:
    return CliRunner().invoke(app, [str(argument) for argument in arguments])


def rows_of(path: Path) -> list[dict[str, str]]:
    return list(csv.DictReader(path.read_text(encoding="utf-8").splitlines()))


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return small(tmp_path / "study")


def test_bare_call_lists_the_questions() -> None:
    result = run()
    assert result.exit_code == 0
    for question in ("where do I start?", "are my files sound?", "what do I run next?"):
        assert question in result.stdout


def test_version() -> None:
    from importlib.metadata import version

    assert run("--version").stdout == f"muntin {version('muntin')}\n"


@pytest.mark.parametrize(
    "command", ["new", "check", "assess", "propose", "prepare", "rehearse", "verify", "advise"]
)
def test_every_command_has_help_and_the_common_options(command: str) -> None:
    result = run(command, "--help")
    assert result.exit_code == 0
    for option in ("--json", "--seed", "--quiet"):
        assert option in result.stdout


def test_new_check_and_advise_follow_each_other(tmp_path: Path) -> None:
    folder = tmp_path / "fresh"
    assert run("new", folder).exit_code == 0
    assert run("check", folder).exit_code == 0
    result = run("advise", folder, "--wells", 6, "--surrogate", "quadratic")
    assert result.exit_code == 0, result.stderr
    assert "Nothing has been read yet" in result.stdout
    assert len(list((folder / "plans").iterdir())) == 1


def test_new_quotes_a_folder_with_a_blank(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    folder = "my first screen"
    monkeypatch.chdir(tmp_path)
    lines = run("new", folder).stdout.splitlines()
    commands = [line.split("muntin ")[1] for line in lines if "muntin " in line]
    assert [shlex.split(command)[:2] for command in commands] == [
        ["check", folder],
        ["advise", folder],
    ]


def test_new_refuses_a_folder_with_a_study(study: Path) -> None:
    before = tree(study)
    result = run("new", study)
    assert (result.exit_code, result.stdout, tree(study)) == (2, "", before)
    assert "is already there and is not overwritten" in result.stderr


def test_check_prints_the_whole_of_what_was_read(study: Path) -> None:
    result = run("check", study)
    assert (result.exit_code, result.stdout, result.stderr) == (0, CHECKED, "")


def test_check_writes_the_wells_as_they_were_read(study: Path, tmp_path: Path) -> None:
    out = tmp_path / "wells.csv"
    result = run("check", study, "--out", out)
    assert result.exit_code == 0, result.stderr
    assert f"{out}: the wells" in " ".join(result.stdout.split()).replace("/ ", "/")
    read, wells = rows_of(out), open_study(study).wells
    assert [row["well"] for row in read] == list(wells["well"])
    assert [row["recovery_state"] for row in read] == list(wells["recovery_state"])
    assert {*read[0]} >= {"plate", "role", "ph", "ph_target", "recovery", "recovery_sd", "exclude"}
    plate = next((study / "plates").glob("*.csv"))
    before = tree(study)
    refused = run("check", study, "--out", plate)
    assert "is read by this command and is not overwritten" in refused.stderr
    assert tree(study) == before


def test_check_shows_the_users_words_as_they_stand(tmp_path: Path) -> None:
    toml = STUDY.replace("Small invented study", "[bold]Small[/bold] :warning: study")
    result = run("check", small(tmp_path, toml=toml))
    assert result.stdout.splitlines()[0] == "[bold]Small[/bold] :warning: study"


@pytest.mark.parametrize("command", ["check", "assess", "propose", "advise"])
def test_json_is_the_only_thing_on_stdout(study: Path, command: str) -> None:
    result = run(command, study, "--json")
    assert (result.exit_code, result.stderr) == (0, "")
    facts = json.loads(result.stdout, parse_constant=pytest.fail)
    assert facts["command"] == command
    assert facts["study"]["readings"] == {
        "recovery": {"read": 12, "awaited": 0, "excluded": 0, "censored": 0}
    }


def test_json_of_new(tmp_path: Path) -> None:
    facts = json.loads(run("new", tmp_path / "s", "--json").stdout)
    assert [Path(path).name for path in facts["files"]] == ["study.toml", "plate-01.csv"]


@pytest.mark.parametrize("command", ["check", "assess", "propose", "advise"])
def test_quiet_prints_nothing(study: Path, command: str) -> None:
    result = run(command, study, "--quiet")
    assert (result.exit_code, result.stdout, result.stderr) == (0, "", "")


def test_faults_as_json_are_on_stdout_and_in_words_on_stderr(study: Path) -> None:
    (study / "study.toml").write_text(STUDY.replace("low = 50", "low = 500"))
    result = run("check", study, "--json")
    line = "study.toml, factors, salt, low: 500 must lie below high, which is 450"
    assert (result.exit_code, result.stderr) == (2, line + "\n")
    assert [fault["text"] for fault in json.loads(result.stdout)["faults"]] == [line]


def test_assess_judges_the_conditions_of_a_table(study: Path, tmp_path: Path) -> None:
    at, out = tmp_path / "at.csv", tmp_path / "out.csv"
    at.write_text("name;ph;salt\nlow;4,5;100\nhigh;7;400\n")
    result = run("assess", study, "--at", at, "--out", out)
    assert result.exit_code == 0, result.stderr
    low, high = rows_of(out)
    assert [low["name"], low["ph"], low["salt"]] == ["low", "4.5", "100"]
    assert float(low["p_mean"]) < 0.1 < 0.9 < float(high["p_mean"])
    assert list(high)[3:] == [
        *("recovery_mean", "recovery_low", "recovery_high", "recovery_p_mean", "recovery_p_well"),
        *("p_mean", "p_well", "p_kept"),
    ]
    shown = run("assess", study, "--at", at)
    assert f"{float(high['p_kept']):.3f}" in shown.stdout


def test_assess_writes_the_whole_range_without_a_table(study: Path, tmp_path: Path) -> None:
    out = tmp_path / "out.csv"
    assert run("assess", study, "--out", out).exit_code == 0
    assert len(rows_of(out)) == 7 * 9


AT_FAULTS = {
    "no_file": (None, "{at}: there is no such file"),
    "missing_column": ("ph\n5\n", "{at}: has no column salt"),
    "text": ("ph,salt\n5,much\n", '{at}, row 2, column salt: "much" is not a number'),
    "outside": (
        "ph,salt\n5,900\n",
        "{at}, row 2, column salt: 900 lies outside 50 to 450 mM (study.toml, factors, salt)",
    ),
    "no_row": ("ph,salt\n", "{at}: holds no condition below its headings"),
}


@pytest.mark.parametrize(("content", "line"), AT_FAULTS.values(), ids=AT_FAULTS)
def test_faults_of_the_conditions(
    study: Path, tmp_path: Path, content: str | None, line: str
) -> None:
    at, out = tmp_path / "at.csv", tmp_path / "out.csv"
    if content is not None:
        at.write_text(content)
    result = run("assess", study, "--at", at, "--out", out)
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr == line.format(at=at) + "\n"
    assert not out.exists()


def test_assess_never_overwrites_what_it_reads(study: Path) -> None:
    table = study / "plates" / "plate-01.csv"
    before = table.read_bytes()
    result = run("assess", study, "--out", table)
    assert result.exit_code == 2
    assert result.stderr == f"{table}: is read by this command and is not overwritten\n"
    assert table.read_bytes() == before


@pytest.mark.parametrize("name", ["out.xlsx", "out", "out.csv.txt"])
def test_assess_writes_csv_only(study: Path, tmp_path: Path, name: str) -> None:
    out = tmp_path / name
    before = tree(tmp_path)
    result = run("assess", study, "--out", out)
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr == (
        f"{out}: cannot be written; tables are written as .csv (name it out.csv)\n"
    )
    assert tree(tmp_path) == before


def test_assess_says_what_is_awaited(tmp_path: Path) -> None:
    files = {"study.toml": ONE_FACTOR, "plates/plate-01.csv": one_factor_plate(hcp=False)}
    result = run("assess", write(tmp_path, files))
    assert "Awaited: HCP; the advice is provisional." in result.stdout
    assert "Predicted operating window (plate scale) for Recovery alone:" in result.stdout


def test_propose_writes_a_plan_that_can_be_filled_and_read(study: Path) -> None:
    result = run("propose", study, "--wells", 5)
    assert result.exit_code == 0, result.stderr
    plan = study / "plans" / "plate-02.csv"
    rows = rows_of(plan)
    assert list(rows[0]) == ["well", "role", "ph", "salt", "recovery", "exclude", "p_now", "reason"]
    assert sum(row["role"] == "test" for row in rows) == 5
    filled = [{**row, "recovery": "0.5"} if row["ph"] else row for row in rows]
    with (study / "plates" / "plate-02.csv").open("w", newline="") as stream:
        writer = csv.DictWriter(stream, list(rows[0]))
        writer.writeheader()
        writer.writerows(filled)
    facts = json.loads(run("check", study, "--json").stdout)
    assert facts["study"]["plates"] == 2
    assert facts["study"]["notices"] == []


def test_same_seed_same_output(study: Path) -> None:
    first, second = (run("propose", study, "--wells", 4, "--seed", 7, "--json") for _ in range(2))
    assert first.stdout == second.stdout
    other = json.loads(run("propose", study, "--wells", 4, "--seed", 8, "--json").stdout)
    assert other["plan"]["wells"] != json.loads(first.stdout)["plan"]["wells"]


def test_an_unknown_option_ends_with_2(study: Path) -> None:
    result = run("advise", study, "--aim", "middle")
    assert result.exit_code == 2
    assert "Traceback" not in result.stderr


def test_help_imports_nothing_heavy() -> None:
    code = (
        "import sys; sys.argv = ['muntin', '--help']\n"
        "from muntin.cli import app\n"
        "app(standalone_mode=False)\n"
        "heavy = {'matplotlib', 'sklearn', 'openpyxl', 'scipy'} & set(sys.modules)\n"
        "sys.exit(', '.join(sorted(heavy)) or 0)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")


def test_influence_is_told_where_it_is_asked_for(study: Path) -> None:
    plain = run("assess", study, "--surrogate", "quadratic")
    asked = run("assess", study, "--surrogate", "quadratic", "--influence")
    table = asked.stdout[len(plain.stdout) :]
    assert asked.stdout.startswith(plain.stdout)
    assert table.startswith("Factors   Recovery: share of its variation over the range")
    assert "probability" not in table


def test_a_size_asks_for_influence_too(study: Path) -> None:
    sized = run("assess", study, "--surrogate", "quadratic", "--negligible", "0.1", "--json")
    influence = json.loads(sized.stdout)["influence"]
    assert influence["negligible"] == 0.1
    rows = influence["responses"]["recovery"]
    assert [row["factor"] for row in rows] == ["ph", "salt"]
    for row in rows:
        assert 0.0 < row["first_low"] < row["first"] < row["first_high"] < row["total_high"] < 1.0
        assert row["p_negligible"] == 0.0
    assert "influence" not in json.loads(run("assess", study, "--json").stdout)


def test_a_size_of_nothing_is_a_fault(study: Path) -> None:
    result = run("assess", study, "--negligible", "0")
    assert result.exit_code == 2
    assert result.stderr == "influence, negligible: 0 is not above 0\n"
