"""The main job killed, on a full disk, and twice at once: a sound study and a sound ledger."""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
import time
import warnings
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from muntin import advise as main_job
from muntin.advise import AdviceSettings, advise, find
from muntin.record import StudyFaults, open_study
from muntin.record.ledger import LEDGER, read_ledger
from muntin.record.writing import STAGE, writing
from muntin.report.page import build
from muntin.verify import verify
from tests.record.dying import dies_at, full_from
from tests.report.studies import small, tree
from tests.test_cli import run

forks = pytest.mark.skipif(not hasattr(os, "fork"), reason="needs processes that fork")
ASKED = AdviceSettings(wells=4, surrogate="quadratic")
QUICK = ("--wells", "4", "--surrogate", "quadratic", "--quiet")
FILES = {"advice.json", "map.png", "map.svg", "forecast.png", "forecast.svg", "plan.csv"}


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return small(tmp_path / "study")


@pytest.fixture
def fitted(study: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[[Path], object]:
    """The main job with what it finds and draws known beforehand, so that it only writes."""
    found = find(open_study(study), ASKED)
    drawn = main_job._drawn(open_study(study), found)
    monkeypatch.setattr(main_job, "find", lambda *_, **__: found)
    monkeypatch.setattr(main_job, "_drawn", lambda *_: drawn)
    return lambda folder: advise(folder, wells=ASKED.wells, surrogate=ASKED.surrogate)


def sound(folder: Path) -> int:
    """Hold a study to what it must be once the next command has had its turn; number of lines."""
    with writing(folder):
        pass
    open_study(folder)
    found = verify(folder, recompute=False)
    assert (found.differs, found.notes) == ((), ())
    advice = [path for path in folder.glob("advice/*/*") if path.name != "inputs"]
    assert len(advice) == found.lines == len(found.advice)
    for one in advice:
        assert {path.name for path in one.iterdir() if path.is_file()} == FILES
    assert not [path for path in folder.rglob("*") if path.name.startswith(".")]
    return found.lines


@forks
def test_advice_killed_while_it_writes_is_whole_or_not_there(
    study: Path, tmp_path: Path, fitted: Callable[[Path], object]
) -> None:
    before, counts = tree(study), []
    for step in [2, 9, 17, 25, *range(32, 48)]:
        folder = Path(shutil.copytree(study, tmp_path / str(step)))
        dead = dies_at(step, lambda folder=folder: fitted(folder))
        counts.append(sound(folder))
        assert counts[-1] or tree(folder) == before
        assert dead or counts[-1] == 1
    assert counts == sorted(counts)
    assert {*counts} == {0, 1}


def test_advice_on_a_full_disk_leaves_what_was_there(
    study: Path, fitted: Callable[[Path], object]
) -> None:
    fitted(study)
    before = tree(study)
    for step in (1, 2, 8, 15, 22):
        with full_from(step) as refused, pytest.raises(StudyFaults, match="No space left"):
            fitted(study)
        assert refused
        assert tree(study) == before
    fitted(study)
    assert sound(study) == 2


def test_two_processes_at_once_leave_two_plans_and_two_lines(study: Path) -> None:
    call = [sys.executable, "-c", "from muntin.cli import main; main()", "propose", str(study)]
    running = [subprocess.Popen([*call, "--seed", seed, *QUICK]) for seed in ("1", "2")]
    assert [process.wait(120) for process in running] == [0, 0]
    ledger = read_ledger(study)
    assert ledger.problems == ()
    assert sorted(line.entry.seed or 0 for line in ledger.sound) == [1, 2]
    assert {path.name for path in (study / "plans").glob("*.csv")} == {
        "plate-02.csv",
        "plate-02.r2.csv",
    }
    for line in ledger.sound:
        assert len(line.entry.results) == 2
    assert verify(study, recompute=False).clean


@pytest.mark.slow
@forks
def test_advice_killed_at_200_random_moments(study: Path) -> None:
    advise(study, wells=ASKED.wells, surrogate=ASKED.surrogate)
    began = time.monotonic()
    advise(study, wells=ASKED.wells, surrogate=ASKED.surrogate)
    takes, lines, killed = time.monotonic() - began, 2, 0
    moments = np.random.default_rng(5).uniform(0.0, 1.2 * takes, 200)
    for moment in moments:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", DeprecationWarning)
            child = os.fork()
        if child == 0:
            advise(study, wells=ASKED.wells, surrogate=ASKED.surrogate)
            os._exit(0)
        time.sleep(moment)
        os.kill(child, signal.SIGKILL)
        code = os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])
        assert code in (0, -signal.SIGKILL)
        now = sound(study)
        assert now in ((lines + 1,) if code == 0 else (lines, lines + 1))
        lines, killed = now, killed + (code != 0)
        assert (study / "plans" / "plate-02.csv").is_file()
    assert 100 < killed < 200
    assert verify(study, recompute=False).clean


# Options, and seconds that writing takes at most.
CALLS = {"report": (QUICK, 0.06), "confirm": (("--quiet",), 0.015)}


@pytest.mark.slow
@forks
@pytest.mark.parametrize("command", CALLS)
def test_page_and_column_runs_killed_while_they_are_written(
    study: Path, monkeypatch: pytest.MonkeyPatch, command: str
) -> None:
    # The page of the first call serves them all, so that the others only write.
    monkeypatch.setattr(build, "build_page", once(build.build_page))
    options, takes = CALLS[command]
    assert run(command, study, *options).exit_code == 0
    again = ("--again", "--because", "a second lot") if command == "confirm" else ()
    lines, killed, finished = 1, 0, 0
    for delay in np.random.default_rng(6).uniform(0.0, takes, 16):
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", DeprecationWarning)
            child = os.fork()
        if child == 0:
            os._exit(run(command, study, *options, *again).exit_code)
        code = killed_once_it_writes(child, study / STAGE, delay)
        assert code in (0, -signal.SIGKILL)
        killed += code != 0
        with writing(study) as pen:
            finished += bool(pen.remarks)
        found = verify(study, recompute=False)
        assert (found.differs, found.notes) == ((), ())
        assert found.lines in ((lines + 1,) if code == 0 else (lines, lines + 1))
        assert not [path for path in study.rglob("*") if path.name.startswith(".")]
        lines = found.lines
    assert killed > 4
    assert finished < killed


def once(work: Callable[..., Any]) -> Callable[..., Any]:
    """The same work, done at the first call only."""
    done: list[Any] = []

    def known(*given: Any, **named: Any) -> Any:
        if not done:
            done.append(work(*given, **named))
        return done[0]

    return known


def killed_once_it_writes(child: int, stage: Path, delay: float) -> int:
    """Kill a process so many seconds after it has begun to write; its exit code."""
    while not stage.exists():
        ended, status = os.waitpid(child, os.WNOHANG)
        if ended:
            return os.waitstatus_to_exitcode(status)
        time.sleep(0.0005)
    time.sleep(delay)
    os.kill(child, signal.SIGKILL)
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])


@pytest.mark.slow
def test_a_disk_that_is_really_full(tmp_path: Path) -> None:
    disk = tmp_path / "disk"
    disk.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=700k", "tmpfs", str(disk)]
    if shutil.which("mount") is None or subprocess.run(mount, capture_output=True).returncode:
        pytest.skip("no small disk can be mounted here")
    try:
        study = small(disk / "study")
        assert run("advise", study, *QUICK).exit_code == 0
        before, turns = tree(study), 1
        while (result := run("advise", study, *QUICK)).exit_code == 0:
            before, turns = tree(study), turns + 1
        assert result.exit_code == 2
        assert "cannot be written (No space left on device)" in result.stderr
        assert tree(study) == before
        assert sound(study) == turns
        assert (study / LEDGER).read_bytes() == before[LEDGER]
    finally:
        subprocess.run(["umount", str(disk)], check=True)
