"""Files: written whole or not at all, decoded whatever their encoding."""

from __future__ import annotations

import os

import pytest

from muntin.record import StudyFaults, write_atomic
from muntin.record.files import NotTextError, decoded


def test_content_is_written_with_its_folders(tmp_path):
    path = tmp_path / "a" / "b.txt"
    write_atomic(path, "pH µ\n")
    assert path.read_bytes() == "pH µ\n".encode()
    write_atomic(path, b"\x00\x01")
    assert path.read_bytes() == b"\x00\x01"
    assert [p.name for p in path.parent.iterdir()] == ["b.txt"]


def test_a_failed_write_leaves_the_old_file_and_no_other(tmp_path, monkeypatch):
    path = tmp_path / "b.txt"
    path.write_text("old")

    def no_space(handle):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", no_space)
    with pytest.raises(StudyFaults) as raised:
        write_atomic(path, "new")
    assert str(raised.value) == f"{path}: cannot be written (No space left on device)"
    assert [p.read_text() for p in tmp_path.iterdir()] == ["old"]


def test_a_place_that_cannot_be_written(tmp_path):
    (tmp_path / "file").write_text("")
    path = tmp_path / "file" / "b.txt"
    with pytest.raises(StudyFaults) as raised:
        write_atomic(path, "new")
    assert raised.value.faults[0].problem == "cannot be written"


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "cp1252"])
def test_text_is_decoded(encoding):
    assert decoded("Säule ± µ;1\r\n".encode(encoding)) == "Säule ± µ;1\r\n"


@pytest.mark.parametrize("raw", [b"a\x00b", b"\x89PNG\r\n\x1a\n", b"\xff\xfea"])
def test_bytes_that_are_no_text(raw):
    with pytest.raises(NotTextError):
        decoded(raw)
