"""Writing: all of it or none, whenever a process dies or the disk is full."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import threading
from collections.abc import Callable
from contextlib import ExitStack
from pathlib import Path

import pytest

from muntin.record import StudyFaults
from muntin.record import lock as locks
from muntin.record.edits import sha256
from muntin.record.ledger import LEDGER, Entry, read_ledger
from muntin.record.lock import HELD, LOCK, locked
from muntin.record.writing import STAGE, unfinished_notice, writing
from tests.record.dying import dies_at, full_from
from tests.report.studies import tree, write

forks = pytest.mark.skipif(not hasattr(os, "fork"), reason="needs processes that fork")
pytestmark = pytest.mark.usefixtures("quick_disk")
OLD = {"plans/plate-02.csv": "old plan", "sheets/plate-02/recipes.csv": "old", "study.toml": "s"}
NEW: dict[str, str | bytes] = {
    "advice/plate-02/r1/advice.json": "{}",
    "plans/plate-02.csv": "new plan",
    "plans/offered/plate-02.csv": "new plan",
    "sheets/plate-02/map.png": b"\x89",
}
GONE = "sheets/plate-02/recipes.csv"


def study(folder: Path) -> Path:
    write(folder, OLD)
    with writing(folder) as pen:
        pen.commit({}, Entry(command="new"))
    return folder


def put(folder: Path) -> None:
    with writing(folder) as pen:
        files = {folder / name: content for name, content in NEW.items()}
        pen.commit(files, Entry(command="advise", by="lab 2"), [folder / GONE])


def without_ledger(folder: Path) -> dict[str, bytes]:
    return {name: content for name, content in tree(folder).items() if name != LEDGER}


def without_file(folder: Path) -> list[str]:
    """What the ledger tells of that is not there, or not so."""
    return [
        name
        for line in read_ledger(folder).sound
        for name, of in line.entry.results.items()
        if not (folder / name).is_file() or sha256((folder / name).read_bytes()) != of
    ]


def as_new() -> dict[str, bytes]:
    given = {name: of for name, of in {**OLD, **NEW}.items() if name != GONE}
    return {name: of.encode() if isinstance(of, str) else of for name, of in given.items()}


def test_files_and_line_are_written_and_nothing_else(tmp_path: Path) -> None:
    put(study(tmp_path))
    assert without_ledger(tmp_path) == as_new()
    first, second = read_ledger(tmp_path).sound
    assert (first.entry.command, second.entry.command) == ("new", "advise")
    assert set(second.entry.results) == set(NEW)
    assert [path.name for path in tmp_path.iterdir() if path.name.startswith(".")] == []


@forks
def test_a_process_killed_at_any_step_leaves_all_or_nothing(tmp_path: Path) -> None:
    before = tree(study(tmp_path / "whole"))
    outcomes, step = [], 0
    while True:
        step += 1
        folder = study(tmp_path / str(step))
        if not dies_at(step, lambda folder=folder: put(folder)):
            break
        told = unfinished_notice(folder)
        assert without_file(folder) == []
        with writing(folder) as pen:
            remarks = pen.remarks
        after = without_ledger(folder)
        done = after == as_new()
        assert done or after == {n: c for n, c in before.items() if n != LEDGER}
        ledger = read_ledger(folder)
        assert ledger.problems == ()
        assert [line.entry.command for line in ledger.sound] == ["new", "advise"][: 1 + done]
        assert bool(told) == bool(remarks)
        assert done or not told
        outcomes.append(done)
    assert step > 20
    # Everything before the point of no return is undone, everything after it is finished.
    assert outcomes == sorted(outcomes)
    assert {False, True} == set(outcomes)


@pytest.fixture
def killed(tmp_path: Path) -> Path:
    """A study in which a process was killed just after the point of no return."""
    for step in range(20, 100):
        folder = study(tmp_path / f"killed-{step}")
        if dies_at(step, lambda folder=folder: put(folder)) and unfinished_notice(folder):
            return folder
    raise AssertionError("never killed there")


@forks
def test_a_finish_that_is_killed_too_is_finished_by_the_next(killed: Path, tmp_path: Path) -> None:
    def finish(folder: Path) -> None:
        with writing(folder):
            pass

    step, dead = 0, True
    while dead:
        step += 1
        folder = tmp_path / str(step)
        shutil.copytree(killed, folder)
        dead = dies_at(step, lambda folder=folder: finish(folder))
        finish(folder)
        assert without_ledger(folder) == as_new()
        assert len(read_ledger(folder).sound) == 2
    assert step > 8


@forks
def test_what_was_changed_since_a_kill_is_set_aside(killed: Path) -> None:
    folder = killed
    (folder / "plans" / "plate-02.csv").write_text("mine")
    with writing(folder) as pen:
        remarks = pen.remarks
    assert (folder / "plans" / "plate-02.csv").read_text() == "new plan"
    assert (folder / "plans" / "plate-02.csv.aside-1").read_text() == "mine"
    assert "your version is plate-02.csv.aside-1 beside it" in remarks[1]


def test_a_full_disk_leaves_what_was_there(tmp_path: Path) -> None:
    before = tree(study(tmp_path))
    step, said = 0, "No space left on device"
    while said:
        step += 1
        with full_from(step):
            said = fault_of(lambda: put(tmp_path))
        assert not said or "cannot be written (No space left on device)" in said
        if said:
            assert tree(tmp_path) == before
            assert [path.name for path in tmp_path.iterdir() if path.name.startswith(".")] == []
    assert step > 12
    assert without_ledger(tmp_path) == as_new()


def fault_of(work: Callable[[], object]) -> str:
    """The faults that `work` ends with; "" for none."""
    try:
        work()
    except StudyFaults as faults:
        return str(faults)
    return ""


@pytest.mark.parametrize("name", [*NEW, LEDGER])
def test_a_file_that_cannot_take_its_name_takes_all_back(
    tmp_path: Path, name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = tree(study(tmp_path))
    replace = Path.replace

    def refused(path: Path, target: Path) -> Path:
        inside = f"{path.as_posix()}/".partition(f"{STAGE}/new/")[2]
        if inside and f"{name}/".startswith(inside):
            raise PermissionError(13, "Permission denied", str(path))
        return replace(path, target)

    with monkeypatch.context() as patched:
        patched.setattr(Path, "replace", refused)
        with pytest.raises(StudyFaults, match="cannot be written"):
            put(tmp_path)
    assert tree(tmp_path) == before
    put(tmp_path)
    assert without_ledger(tmp_path) == as_new()


WRITER = """
import sys
from pathlib import Path
from muntin.record.ledger import Entry
from muntin.record.writing import writing

folder, own = Path(sys.argv[1]), sys.argv[2]
for turn in range(8):
    with writing(folder) as pen:
        pen.commit({folder / own / f"{turn}.txt": own}, Entry(command="advise", by=own))
"""


def test_processes_at_once_lose_nothing(tmp_path: Path) -> None:
    names = ["one", "two", "three"]
    running = [subprocess.Popen([sys.executable, "-c", WRITER, tmp_path, n]) for n in names]
    assert [process.wait(60) for process in running] == [0, 0, 0]
    ledger = read_ledger(tmp_path)
    assert ledger.problems == ()
    said = [(line.entry.by, *line.entry.results) for line in ledger.sound]
    assert sorted(said) == sorted((n, f"{n}/{turn}.txt") for n in names for turn in range(8))
    assert len(tree(tmp_path)) == 25


def held_for(folder: Path) -> None:
    with locked(folder, seconds=0.1):
        pass


def test_a_second_writer_waits_and_is_told_in_the_end(tmp_path: Path) -> None:
    def try_it() -> None:
        told.append(fault_of(lambda: held_for(tmp_path)))

    told: list[str] = []
    with locked(tmp_path):
        thread = threading.Thread(target=try_it)
        thread.start()
        thread.join()
    assert told == [f"{tmp_path}: is being written by another (wait until it is done)"]
    with locked(tmp_path, seconds=0.1):
        assert (tmp_path / LOCK).exists()
    assert [*tmp_path.iterdir()] == []


@pytest.mark.skipif(sys.platform == "win32", reason="an open file cannot be replaced there")
@pytest.mark.parametrize("again", [True, False])
def test_a_lock_given_up_between_opening_and_taking_it_is_another_one(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, again: bool
) -> None:
    first, third, taken = ExitStack(), ExitStack(), locks._taken

    def late(descriptor: int) -> bool:
        monkeypatch.setattr(locks, "_taken", taken)
        first.close()
        if again:
            third.enter_context(locked(tmp_path))
        return taken(descriptor)

    first.enter_context(locked(tmp_path))
    monkeypatch.setattr(locks, "_taken", late)
    with third:
        assert ("is being written by another" in fault_of(lambda: held_for(tmp_path))) == again
    assert [*tmp_path.iterdir()] == []


def test_where_there_are_no_locks_a_file_stands_for_one(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    import errno

    def none(_: int) -> bool:
        raise OSError(errno.ENOLCK, "No locks available")

    monkeypatch.setattr(locks, "_taken", none)
    with locked(tmp_path):
        assert [path.name for path in tmp_path.iterdir()] == [HELD]
        said = fault_of(lambda: held_for(tmp_path))
    assert f"or one was killed: if no muntin is at work, remove {tmp_path / HELD}" in said
    assert [*tmp_path.iterdir()] == []


def test_a_folder_that_cannot_be_written(tmp_path: Path) -> None:
    with pytest.raises(StudyFaults, match="cannot be written"), writing(tmp_path / "none"):
        pass
