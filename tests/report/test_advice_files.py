"""Advice on disk: whole or not at all."""

from __future__ import annotations

from pathlib import Path

import pytest

from muntin.record import StudyFaults
from muntin.report.advice_files import new_folder, read_inputs
from tests.report.studies import small, tree, write


def test_folder_takes_its_name_when_the_block_ends(tmp_path: Path) -> None:
    target = tmp_path / "advice" / "plate-02" / "r1"
    with new_folder(target) as part:
        (part / "a.txt").write_text("a")
        assert not target.exists()
    assert tree(tmp_path) == {"advice/plate-02/r1/a.txt": b"a"}


def break_within(target: Path) -> None:
    with new_folder(target) as part:
        (part / "a.txt").write_text("a")
        raise RuntimeError("broke")


def test_nothing_is_left_of_a_block_that_breaks(tmp_path: Path) -> None:
    (tmp_path / "there").mkdir()
    with pytest.raises(RuntimeError, match="broke"):
        break_within(tmp_path / "there" / "plate-02" / "r1")
    assert [path.name for path in tmp_path.rglob("*")] == ["there"]


def test_folder_that_is_there_is_not_replaced(tmp_path: Path) -> None:
    target = tmp_path / "r1"
    target.mkdir()
    (target / "old.txt").write_text("old")
    with pytest.raises(StudyFaults) as caught, new_folder(target) as part:
        (part / "new.txt").write_text("new")
    assert str(caught.value) == f"{target}: cannot be written (Directory not empty)"
    assert tree(tmp_path) == {"r1/old.txt": b"old"}


def test_inputs_are_what_open_study_reads(tmp_path: Path) -> None:
    folder = small(tmp_path)
    read = {
        "results/late.xlsx": b"1",
        "stocks/plate-01.csv": b"2",
        "plates/plate-01.toml": b"3",
    }
    unread = {"plates/~$plate-01.csv": b"", "plates/.plate.csv": b"", "results/a.toml": b""}
    unread |= {"plans/plate-02.csv": b"", "plates/deeper/plate-09.csv": b"", "notes.csv": b""}
    before = set(read_inputs(folder))
    write(folder, {**read, **unread})
    assert before == {"study.toml", "plates/plate-01.csv"}
    assert set(read_inputs(folder)) == before | set(read)
