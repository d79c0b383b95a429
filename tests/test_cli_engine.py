"""The commands with --engine nuts: what they say, write and refuse."""

import json
import sys

import pytest
from typer.testing import CliRunner

from muntin.cli import app
from muntin.surrogate import nuts
from tests.report.studies import small
from tests.stand_in import stand_in


def run(*arguments):
    return CliRunner().invoke(app, [str(argument) for argument in arguments])


@pytest.fixture
def study(tmp_path, monkeypatch):
    monkeypatch.setattr(nuts, "sample", stand_in)
    return small(tmp_path / "study")


def test_assess_writes_the_draws_and_says_which_engine(study, tmp_path):
    place = tmp_path / "draws"
    result = run("assess", study, "--engine", "nuts", "--draws", place, "--json")
    assert result.exit_code == 0, result.output
    facts = json.loads(result.stdout)
    assert facts["settings"]["engine"] == facts["engine"] == "nuts"
    names = ["recovery-gp.nc", "recovery-quadratic.nc"]
    assert facts["draws"] == [str(place / name) for name in names]
    assert sorted(p.name for p in place.iterdir()) == names
    sampling = facts["model"]["recovery"]["sampling"]
    assert {name: one["passed"] for name, one in sampling.items()} == {
        "gp": True,
        "quadratic": True,
    }


def test_the_screen_says_how_the_chains_did_and_where_the_draws_are(study, tmp_path):
    place = tmp_path / "draws"
    result = run("assess", study, "--engine", "nuts", "--surrogate", "quadratic", "--draws", place)
    assert result.exit_code == 0, result.output
    # A long path is folded over lines.
    said = "".join(result.stdout.split())
    assert "4chains" in said
    assert str(place / "recovery-quadratic.nc") in said


@pytest.mark.parametrize("command", ["propose", "advise"])
def test_plans_rest_on_the_engine_asked_for(study, command):
    result = run(command, study, "--engine", "nuts", "--surrogate", "quadratic", "--json")
    assert result.exit_code == 0, result.output
    assert json.loads(result.stdout)["settings"]["engine"] == "nuts"


def test_the_fast_engine_has_no_draws_to_write(study, tmp_path):
    result = run("assess", study, "--draws", tmp_path / "draws")
    assert result.exit_code == 2
    assert result.stdout == ""
    place = tmp_path / "draws"
    assert result.stderr == f"{place}: gets no draws: only --engine nuts makes them\n"


def test_draws_do_not_go_into_a_file(study, tmp_path):
    place = tmp_path / "draws"
    place.write_text("mine")
    result = run("assess", study, "--engine", "nuts", "--draws", place)
    assert result.exit_code == 2
    assert result.stderr == f"{place}: is a file, not a folder for draws\n"
    assert place.read_text() == "mine"


def test_without_pymc_the_command_says_what_to_install(study, monkeypatch):
    monkeypatch.setitem(sys.modules, "pymc", None)
    result = run("assess", study, "--engine", "nuts")
    assert result.exit_code == 2
    assert result.stderr.startswith("engine: the engine nuts needs PyMC")
    assert "pip install 'muntin[nuts]'" in result.stderr


def test_student_noise_reaches_the_sampler(study, monkeypatch):
    seen = []

    def noted(model, seed, settings, near=None):
        seen.append(settings.noise)
        return stand_in(model, seed, settings, near)

    monkeypatch.setattr(nuts, "sample", noted)
    arguments = ("--engine", "nuts", "--noise", "student", "--surrogate", "quadratic", "--json")
    result = run("assess", study, *arguments)
    assert result.exit_code == 0, result.output
    assert json.loads(result.stdout)["settings"]["noise"] == "student"
    assert seen == ["student"]


def test_the_fast_engine_knows_normal_noise_only(study):
    result = run("assess", study, "--noise", "student")
    assert result.exit_code == 2
    assert result.stdout == ""
    assert "--noise student: only --engine nuts knows it" in result.stderr
