"""`muntin rehearse` as it is run: screens, JSON, faults, interrupts."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner, Result

from muntin.cli import app
from muntin.commands.rehearse import time_left
from muntin.record.ledger import LEDGER, read_ledger
from muntin.rehearsal import workers
from tests.report.studies import STUDY, small, tree, write

# Readings of this kind have an exact law, which makes their fits cheap.
PLAIN = STUDY.replace('"fraction"', '"real"\ntypical = [0.0, 1.0]')
QUICK = ("--surrogate", "quadratic", "--series", "2", "--plates", "3,2", "--workers", "1")


def run(folder: Path, *arguments: object, quick: bool = True) -> Result:
    given = ("rehearse", folder, *(QUICK if quick else ()), *arguments)
    return CliRunner().invoke(app, [str(argument) for argument in given])


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return small(tmp_path / "study", toml=PLAIN)


def words(result: Result) -> str:
    return " ".join(result.stdout.split())


def test_the_screen_says_what_was_played_and_ends_in_a_verdict(study: Path) -> None:
    result = run(study)
    assert (result.exit_code, result.stderr) == (0, "")
    lines = result.stdout.splitlines()
    assert max(map(len, lines)) <= 100
    said = words(result)
    assert "2 series of 3 + 2 test wells (aim edge, seed 1) on surfaces drawn from" in said
    assert (
        "At most 2.0 % of the range may be called wrongly, as the tool says it. An example" in said
    )
    assert "One shot: its choice of all wells at once" in said
    for design in ("plate by plate", "one shot", "full factorial", "space filling"):
        assert re.search(rf"{design} \d of 2 ", said), design
    headings = [line[:12].strip() for line in lines[1:] if line[:12].strip()]
    assert headings == [
        *("Read", "Played", "Stop rule", "Wrong calls", "Caution", "Rivals", "Verdict")
    ]


def test_many_plates_stand_one_below_the_other(study: Path) -> None:
    lines = run(study, "--plates", "1,1,1,1", "--series", "1").stdout.splitlines()
    assert max(map(len, lines)) <= 100
    first = [line.split()[0] for line in lines if line.strip().endswith("%)")]
    assert first == ["now", "1", "2", "3", "4"]


def test_a_second_start_takes_up_what_was_played(study: Path) -> None:
    first = run(study)
    again = run(study)
    taken = "2 of them were played before and taken up from rehearsals/."
    assert taken not in words(first)
    assert taken in words(again)
    assert words(again).replace(f"{taken} ", "") == words(first)


def test_json_is_the_only_thing_on_stdout_and_the_same_each_time(study: Path) -> None:
    result = run(study, "--json")
    assert (result.exit_code, result.stderr) == (0, "")
    facts = json.loads(result.stdout, parse_constant=pytest.fail)
    assert facts["command"] == "rehearse"
    assert facts["settings"]["plates"] == [3, 2]
    assert [row["design"] for row in facts["to_stop"]] == [
        *("plate by plate", "one shot", "full factorial", "space filling")
    ]
    assert {row["plate"] for row in facts["after"]} == {0, 1, 2}
    again = json.loads(run(study, "--json").stdout)
    assert (facts.pop("taken_up"), again.pop("taken_up")) == (0, 2)
    assert again == facts


def test_quiet_prints_nothing(study: Path) -> None:
    result = run(study, "--quiet")
    assert (result.exit_code, result.stdout, result.stderr) == (0, "", "")


def test_the_studys_files_stay_and_series_are_kept_beside_them(study: Path) -> None:
    before = tree(study)
    run(study)
    after = tree(study)
    assert {name: after[name] for name in before} == before
    new = sorted(set(after) - set(before) - {LEDGER})
    kept = [Path(name) for name in new]
    assert {path.parent.parent.as_posix() for path in kept} == {"rehearsals"}
    assert [path.name for path in kept] == ["series-0001.json", "series-0002.json"]
    (line,) = read_ledger(study).sound
    assert (line.entry.command, [*line.entry.results]) == ("rehearse", new)


def test_a_spoilt_file_is_told(study: Path) -> None:
    run(study)
    path = next(study.rglob("series-0001.json"))
    path.write_text("{")
    assert f"{path.parent.name}/series-0001.json was spoilt and is played again" in words(
        run(study)
    )


def test_an_interrupt_says_what_is_kept_and_ends_with_1(
    study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    real: Callable[..., Any] = workers.play

    def breaking(setup: Any, recipe: Any) -> Any:
        if recipe.number == 1:
            raise KeyboardInterrupt
        return real(setup, recipe)

    monkeypatch.setattr(workers, "play", breaking)
    result = run(study)
    assert (result.exit_code, result.stdout) == (1, "")
    assert result.stderr == (
        f"interrupted: 1 of 2 series are kept in {study / 'rehearsals'}; the same command goes on "
        "from there\n"
    )
    monkeypatch.undo()
    assert "1 of them were played before" in words(run(study))


def test_an_interrupt_before_a_series_is_done_promises_nothing(
    study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def breaking(setup: Any, recipe: Any) -> Any:
        raise KeyboardInterrupt

    monkeypatch.setattr(workers, "play", breaking)
    result = run(study)
    assert (result.exit_code, result.stdout) == (1, "")
    assert result.stderr == "interrupted: no series was finished yet\n"
    assert not (study / "rehearsals").exists()


@pytest.mark.parametrize("plates", ["", "12;12", "twelve", "-3", "12,", "1.5"])
def test_plates_that_are_no_numbers(study: Path, plates: str) -> None:
    before = tree(study)
    result = run(study, "--plates", plates)
    assert (result.exit_code, result.stdout, tree(study)) == (2, "", before)
    assert result.stderr == (
        f'plates: "{plates}" is not a list of whole numbers of test wells '
        "(write for example 12,12)\n"
    )


def test_plates_may_be_joined_with_a_plus(study: Path) -> None:
    assert "2 series of 3 + 2 test wells" in words(run(study, "--plates", "3 + 2"))


def test_plates_without_room_are_a_fault(study: Path) -> None:
    before = tree(study)
    result = run(study, "--plates", "90")
    assert (result.exit_code, result.stdout, tree(study)) == (2, "", before)
    assert "plates, plate 1: 90 test wells are more than a plate has room for" in result.stderr


@pytest.mark.slow
def test_before_any_reading_labs_are_played(tmp_path: Path) -> None:
    folder = write(tmp_path, {"study.toml": STUDY})
    (folder / "plates").mkdir()
    result = run(folder, "--plates", "6")
    assert (result.exit_code, result.stderr) == (0, "")
    assert "on labs drawn from published mechanism" in words(result)
    assert "they do not foretell yours" in words(result)


def test_the_rule_of_the_study_is_said(tmp_path: Path) -> None:
    toml = PLAIN + "\n[stop]\nwrong_share = 0.9\nbest_probability = 0.95\n"
    said = words(run(small(tmp_path, toml=toml)))
    assert (
        "At most 90.0 % of the range may be called wrongly or the set point reaches 95.0 %" in said
    )
    assert "An example" not in said
    assert "Verdict Stop: the stop rule is met already; no plate is needed." in said


def test_no_cluster_there_is_a_fault(study: Path) -> None:
    pytest.importorskip("distributed")
    result = run(study, "--cluster", "no-scheme://nowhere")
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr.startswith("cluster: no-scheme://nowhere no Dask scheduler answers there")


def test_a_missing_extra_is_named(study: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    import sys

    monkeypatch.setitem(sys.modules, "distributed", None)
    result = run(study, "--cluster", "tcp://localhost:8786")
    assert (result.exit_code, result.stdout) == (2, "")
    assert result.stderr == (
        "cluster: needs Dask, which is not installed (pip install 'muntin[cluster]')\n"
    )


@pytest.mark.parametrize(
    ("played", "left", "seconds", "said"),
    [
        (0, 20, 0.0, ""),
        (2, 18, 10.0, "about 2 min left"),
        (2, 17, 10.0, "about 85 s left"),
        (4, 16, 60.0, "about 4 min left"),
        (20, 0, 100.0, ""),
    ],
)
def test_the_time_left_is_told_by_the_mean_pace(
    played: int, left: int, seconds: float, said: str
) -> None:
    assert time_left(played, left, seconds) == said


def test_progress_is_heard_series_by_series(study: Path) -> None:
    from muntin import open_study, rehearse

    counts: list[tuple[int, int]] = []
    rehearse(
        open_study(study),
        (3,),
        3,
        surrogate="quadratic",
        nodes=4,
        heard=lambda *count: counts.append(count),
    )
    assert counts == [(0, 3), (1, 3), (2, 3), (3, 3)]
