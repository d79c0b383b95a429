"""Inputs of a study: what is read, copied and hashed."""

from __future__ import annotations

from pathlib import Path

from muntin.record.inputs import read_inputs
from tests.report.studies import small, write


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
