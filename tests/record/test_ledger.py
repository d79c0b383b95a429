"""The ledger: a chain of lines that no cut, edit or deletion gets past unseen."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from muntin.record.ledger import LEDGER, Entry, Ledger, ledger_of, line_after, read_ledger
from muntin.record.writing import writing
from tests.record.conftest import STEADY


def chain(*commands: str) -> bytes:
    """The file of a ledger with one line a command."""
    raw = b""
    for command in commands:
        entry = Entry(command=command, by="Müller, lab 2", settings={"wells": 12}, changes=("a",))
        line = line_after(ledger_of(raw), entry, "2026-05-04T08:00:00+00:00")
        raw += line.text.encode() + b"\n"
    return raw


WHOLE = chain("advise", "propose", "reduce")
LINES = WHOLE.decode().splitlines()


def test_lines_are_read_as_they_were_written() -> None:
    ledger = ledger_of(WHOLE)
    assert [line.entry.command for line in ledger.sound] == ["advise", "propose", "reduce"]
    assert [line.number for line in ledger.sound] == [1, 2, 3]
    assert ledger.sound[0].entry.by == "Müller, lab 2"
    assert ledger.sound[0].entry.changes == ("a",)
    assert (ledger.problems, ledger.torn, ledger.next_number) == ((), b"", 4)
    assert ledger.sound[0].before == ""
    assert json.loads(LINES[1])["before"] == ledger.sound[1].before != ledger.sound[2].before


def test_no_ledger_is_an_empty_one(tmp_path: Path) -> None:
    assert read_ledger(tmp_path) == Ledger() == ledger_of(b"")
    assert Ledger().next_number == 1


@STEADY
@given(st.integers(0, len(WHOLE)))
def test_a_ledger_cut_at_any_byte_keeps_its_whole_lines_and_the_rest(cut: int) -> None:
    ledger = ledger_of(WHOLE[:cut])
    ends = [sum(len(line.encode()) + 1 for line in LINES[: n + 1]) for n in range(3)]
    whole = sum(cut >= end - 1 for end in ends)  # only the line's end is missing: it is whole
    assert [line.text for line in ledger.sound] == LINES[:whole]
    begun = ends[whole - 1] if whole else 0
    assert ledger.torn == WHOLE[begun:cut]
    assert len(ledger.problems) == bool(ledger.torn)
    assert all("torn" in said for said in ledger.problems)


@settings(STEADY, max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.integers(0, len(WHOLE)))
@pytest.mark.usefixtures("quick_disk")
def test_the_next_line_sets_aside_what_is_torn(cut: int) -> None:
    import tempfile

    with tempfile.TemporaryDirectory() as made:
        folder = Path(made)
        (folder / LEDGER).write_bytes(WHOLE[:cut])
        before = read_ledger(folder)
        with writing(folder) as pen:
            line = pen.commit({}, Entry(command="advise"))
            remarks = pen.remarks
        after = read_ledger(folder)
        assert after.problems == ()
        assert after.texts == (*before.texts, line.text)
        aside = folder / "ledger-torn-1.txt"
        assert aside.exists() == bool(before.torn)
        if before.torn:
            assert aside.read_bytes() == before.torn
            assert remarks == [
                f"The last line of {LEDGER} was torn; it is set aside in ledger-torn-1.txt."
            ]


def problems(*lines: str) -> tuple[str, ...]:
    return ledger_of("".join(f"{line}\n" for line in lines).encode()).problems


def rehashed(text: str) -> str:
    """A line edited by somebody who makes its own hash fit again."""
    values = json.loads(text)
    del values["sha256"]
    fields = ("command", "by", "settings", "changes")
    entry = Entry(**{name: values[name] for name in fields})
    held = [json.loads(line)["number"] for line in LINES].index(values["number"])
    earlier = ledger_of("".join(f"{line}\n" for line in LINES[:held]).encode())
    return line_after(earlier, entry, values["time"]).text


@pytest.mark.parametrize("row", [1, 2, 3])
def test_an_edited_line_is_named(row: int) -> None:
    lines = [*LINES]
    lines[row - 1] = lines[row - 1].replace('"wells":12', '"wells":24')
    assert problems(*lines) == (f"ledger.jsonl, line {row}: it was edited after it was written",)


def test_an_edit_that_fits_its_own_hash_breaks_the_chain() -> None:
    lines = [*LINES]
    lines[0] = rehashed(lines[0].replace('"wells":12', '"wells":24'))
    assert '"wells":24' in lines[0]
    assert problems(*lines) == ("ledger.jsonl, line 1: it was edited after line 2 was written",)


@pytest.mark.parametrize(
    ("kept", "said"),
    [
        ((1, 2), "line 1: number 1 was deleted before it"),
        ((0, 2), "line 2: number 2 was deleted before it"),
        ((2,), "line 1: number 1 to 2 was deleted before it"),
        ((0, 0, 1, 2), "line 2: number 1 stands here twice or out of order"),
    ],
)
def test_deleted_and_doubled_lines_are_named(kept: tuple[int, ...], said: str) -> None:
    assert problems(*(LINES[i] for i in kept))[0] == f"ledger.jsonl, {said}"


def test_what_is_no_line_is_named_and_does_not_hide_the_others() -> None:
    ledger = ledger_of(f"{LINES[0]}\nnothing\n".encode())
    assert ledger.problems == ("ledger.jsonl, line 2: it is not a line of the ledger",)
    assert [line.number for line in ledger.sound] == [1]
    assert ledger.next_number == 3


def test_line_ends_of_another_system_are_no_edit() -> None:
    assert ledger_of(WHOLE.replace(b"\n", b"\r\n")).problems == ()


def test_bytes_that_are_no_text_are_kept(tmp_path: Path) -> None:
    (tmp_path / LEDGER).write_bytes(LINES[0].encode() + b"\n\xff\xfe\n")
    with writing(tmp_path) as pen:
        pen.commit({}, Entry(command="advise"))
    assert b"\n\xff\xfe\n" in (tmp_path / LEDGER).read_bytes()
    assert [line.number for line in read_ledger(tmp_path).sound] == [1, 3]
