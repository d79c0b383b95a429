"""The ledger: one JSON line for whatever was written, each with the hash of the line before it.

A line holds its own hash too, so that an edit of the last one shows. What stands behind the last
whole line, torn off by a full disk or a copy that broke, is no line; it is set aside by the next
command that writes (`writing`).
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field, fields
from pathlib import Path
from typing import Any

from muntin.record.faults import Fault, StudyFaults

LEDGER = "ledger.jsonl"


@dataclass(frozen=True, kw_only=True)
class Entry:
    """What a command tells of itself.

    by: who, as given. settings: its options, seed among them. inputs, results: SHA-256 by path in
    the study, of what it read and of what it wrote; removed: what it took away. asked: what
    study.toml asks for. decision: what was decided, such as the verdict. changes: what differs from
    earlier advice, one sentence each; because: the reason given for them.
    """

    command: str
    by: str | None = None
    settings: Mapping[str, Any] = field(default_factory=dict)
    seed: int | None = None
    inputs: Mapping[str, str] = field(default_factory=dict)
    versions: Mapping[str, str] = field(default_factory=dict)
    asked: Mapping[str, Any] = field(default_factory=dict)
    results: Mapping[str, str] = field(default_factory=dict)
    removed: tuple[str, ...] = ()
    decision: Mapping[str, Any] | None = None
    changes: tuple[str, ...] = ()
    because: str | None = None


@dataclass(frozen=True, kw_only=True)
class Line:
    """One line of the ledger: its number, time (UTC), entry, the hash of the line before it (""
    for the first), and its own text.
    """

    number: int
    time: str
    entry: Entry
    before: str
    text: str

    @property
    def open(self) -> bool:
        """Whether it tells of changes for which no reason was given."""
        return bool(self.entry.changes) and not self.entry.because

    @property
    def advice(self) -> str | None:
        """The folder of the advice that it tells of, in the study; None where it tells of none."""
        # A page may bear any name, also that of a file of an advice.
        names = self.entry.results if self.entry.command == "advise" else ()
        kept = [name for name in names if name.endswith("/advice.json")]
        return kept[0].removesuffix("/advice.json") if kept else None


@dataclass(frozen=True, kw_only=True)
class Ledger:
    """The ledger as it stands in a study: its whole lines, as read or None where one is spoilt;
    their texts; what is torn off behind them; and what is wrong with it, one sentence each.
    """

    lines: tuple[Line | None, ...] = ()
    texts: tuple[str, ...] = ()
    torn: bytes = b""
    problems: tuple[str, ...] = ()

    @property
    def sound(self) -> tuple[Line, ...]:
        """The lines that can be read, oldest first."""
        return tuple(line for line in self.lines if line is not None)

    @property
    def last_hash(self) -> str:
        """The hash that the next line is chained to."""
        return text_hash(self.texts[-1]) if self.texts else ""

    @property
    def next_number(self) -> int:
        """The number of the next line."""
        sound = self.sound
        return 1 + max(len(self.texts), sound[-1].number if sound else 0)


def text_hash(text: str) -> str:
    """Return the SHA-256 of a line's text, whatever bytes it was read from."""
    return hashlib.sha256(text.encode("utf-8", "surrogateescape")).hexdigest()


def line_after(ledger: Ledger, entry: Entry, time: str) -> Line:
    """Return the line that an entry makes at the end of a ledger."""
    number, before = ledger.next_number, ledger.last_hash
    told = asdict(entry)
    values = {"number": number, "time": time, **told, "before": before}
    values["sha256"] = _own_hash(values)
    text = json.dumps(values, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    return Line(number=number, time=time, entry=entry, before=before, text=text)


def _own_hash(values: Mapping[str, Any]) -> str:
    """The hash of a line's content, its own hash left out."""
    content = {name: value for name, value in values.items() if name != "sha256"}
    text = json.dumps(content, ensure_ascii=False, sort_keys=True, separators=(",", ":"))
    return text_hash(text)


def read_ledger(folder: Path) -> Ledger:
    """Return the ledger of a study; an empty one where there is none. Raises StudyFaults."""
    try:
        raw = (folder / LEDGER).read_bytes()
    except FileNotFoundError:
        return Ledger()
    except OSError as error:
        why = error.strerror or str(error)
        raise StudyFaults([Fault(file=LEDGER, problem="cannot be read", hint=why)]) from None
    return ledger_of(raw)


def ledger_of(raw: bytes) -> Ledger:
    """Return the ledger in the bytes of its file; nothing of them is lost."""
    whole, _, rest = raw.rpartition(b"\n")
    texts = whole.decode("utf-8", "surrogateescape").split("\n") if whole else []
    texts = [text.removesuffix("\r") for text in texts]
    if rest and _parsed(last := rest.decode("utf-8", "surrogateescape")) is not None:
        texts, rest = [*texts, last], b""
    parsed = [_parsed(text) for text in texts]
    return Ledger(
        lines=tuple(parsed),
        texts=tuple(texts),
        torn=rest,
        problems=(*_chain_problems(texts, parsed), *_torn_problem(rest)),
    )


def _parsed(text: str) -> Line | None:
    """The line in a text; None where it is none, or was altered."""
    try:
        values = json.loads(text)
        if values["sha256"] != _own_hash(values):
            return None
        known = {one.name for one in fields(Entry)}
        told = {name: value for name, value in values.items() if name in known}
        told |= {name: tuple(told.get(name, ())) for name in ("changes", "removed")}
        return Line(
            number=int(values["number"]),
            time=str(values["time"]),
            entry=Entry(**told),
            before=str(values["before"]),
            text=text,
        )
    except (ValueError, KeyError, TypeError, UnicodeError):
        return None


def _chain_problems(texts: list[str], lines: list[Line | None]) -> list[str]:
    """What is wrong with the lines and with their order."""
    problems: list[str] = []
    expected = 1
    before: str | None = ""
    for row, (text, line) in enumerate(zip(texts, lines, strict=True), start=1):
        if line is None:
            problems.append(f"{LEDGER}, line {row}: {_spoilt(text)}")
            expected, before = expected + 1, None
        else:
            problems += _order_problem(row, line, expected, before)
            expected, before = line.number + 1, text_hash(text)
    return problems


def _order_problem(row: int, line: Line, expected: int, before: str | None) -> list[str]:
    """What is wrong with the place of a line; before: hash of the one before it, if sound."""
    if line.number > expected:
        gone = f"{expected}" if line.number == expected + 1 else f"{expected} to {line.number - 1}"
        return [f"{LEDGER}, line {row}: number {gone} was deleted before it"]
    if line.number < expected:
        return [f"{LEDGER}, line {row}: number {line.number} stands here twice or out of order"]
    if before is not None and line.before != before:
        return [f"{LEDGER}, line {row - 1}: it was edited after line {row} was written"]
    return []


def _spoilt(text: str) -> str:
    """Why a text is no line: it was edited, or is none at all."""
    try:
        values = json.loads(text)
        named = isinstance(values, dict) and "sha256" in values and "command" in values
    except ValueError:
        named = False
    return "it was edited after it was written" if named else "it is not a line of the ledger"


def _torn_problem(rest: bytes) -> list[str]:
    if not rest:
        return []
    return [
        f"{LEDGER}: its last line is torn ({len(rest)} bytes without an end); the next command "
        "that writes sets it aside"
    ]
