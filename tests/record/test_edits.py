"""Records of edited plans."""

import pytest

from muntin.record.edits import (
    EditRecord,
    WellChange,
    counts_text,
    record_path,
    record_text,
    recorded_edits,
    sha256,
)

RECORD = EditRecord(
    plate="plate-02",
    plan="plans/plate-02.r2.csv",
    plan_sha256=sha256(b"mine"),
    kept="plans/plate-02.csv",
    kept_sha256="ab",
    offered="plans/offered/plate-02.csv",
    offered_sha256=sha256(b"offered"),
    written_at="2026-05-04T10:00:00+00:00",
    by='lab "2"',
    because="the pH 5 buffer\nis out",
    aim="edge",
    seed=1,
    wells=5,
    wrong_share=0.034,
    inputs={"study.toml": "cd", "plates/plate 01.csv": "ef"},
    changes=(
        WellChange(kind="changed", was="A1 test, pH 5.0", now="A1 test, pH 5.5", p_was=0.4),
        WellChange(kind="left out", was="A2 test, pH 5.0", because="too warm"),
        WellChange(kind="changed", was="A3 test, pH 5.0", now="A3 test, pH 5.5"),
    ),
)


def laid_down(folder, text=None):
    (folder / "plans" / "offered").mkdir(parents=True)
    (folder / "plans" / "plate-02.r2.csv").write_bytes(b"mine")
    (folder / "plans" / "offered" / "plate-02.csv").write_bytes(b"offered")
    path = record_path(folder / "plans" / "plate-02.r2.csv")
    path.write_text(record_text(RECORD) if text is None else text, encoding="utf-8")
    return path


def test_a_record_survives_its_file(tmp_path):
    assert laid_down(tmp_path).name == "plate-02.r2.edit.toml"
    (read,) = recorded_edits(tmp_path)
    assert (read.file, read.record, read.notices) == ("plans/plate-02.r2.edit.toml", RECORD, ())


def test_counts():
    assert counts_text(RECORD) == "2 changed, 1 left out"
    assert counts_text(RECORD.model_copy(update={"changes": ()})) == "nothing changed"


@pytest.mark.parametrize("name", ["plans/plate-02.r2.csv", "plans/offered/plate-02.csv"])
def test_a_plan_that_was_altered_later_is_told(tmp_path, name):
    laid_down(tmp_path)
    (tmp_path / name).write_bytes(b"altered")
    (read,) = recorded_edits(tmp_path)
    assert read.notices == (f"{name} was altered after its edit was recorded",)
    (tmp_path / name).unlink()
    (read,) = recorded_edits(tmp_path)
    assert read.notices == ()


@pytest.mark.parametrize(("text", "said"), [("plate = ", "has no value"), ("a = 1", "a key")])
def test_a_record_that_cannot_be_read_is_told(tmp_path, text, said):
    laid_down(tmp_path, text)
    (read,) = recorded_edits(tmp_path)
    assert read.record is None
    assert any(said in notice for notice in read.notices)
    assert all(n.startswith("plans/plate-02.r2.edit.toml") for n in read.notices)


def test_without_plans_there_is_no_record(tmp_path):
    assert [*recorded_edits(tmp_path)] == []
