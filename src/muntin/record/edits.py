"""Records of edited plans: what was changed against what was offered, by whom and why."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from pydantic import BaseModel

from muntin.record.faults import Findings
from muntin.record.keys import Keys, Number, Text, Whole, key
from muntin.record.offers import PLANS
from muntin.record.tables import natural_order
from muntin.record.template import toml_value
from muntin.record.toml_files import parse, read_toml

ENDING = ".edit.toml"
KINDS = ("changed", "moved", "left out", "added", "chosen")
_HEAD = """\
# What was changed in a plan against the one that was offered; written by muntin propose --keep.
# p_was and p_now are the judged probabilities of the two conditions on the day of writing.
"""


class WellChange(Keys):
    """One well that differs from the offered plan."""

    kind: Literal["changed", "moved", "left out", "added", "chosen"] = key(says="what was done")
    was: Text | None = key(None, says="well, role and condition as offered")
    now: Text | None = key(None, says="well, role and condition as they are now")
    p_was: Number | None = key(None, says="judged probability of the condition offered")
    p_now: Number | None = key(None, says="judged probability of the condition now")
    because: Text | None = key(None, says="why, in the user's words")


class EditRecord(Keys):
    """An edited plan against the one that was offered."""

    plate: Text = key(says="plate that is planned")
    plan: Text = key(says="the plan that was written")
    plan_sha256: Text = key(says="of that file as written")
    kept: Text = key(says="the file that was edited")
    kept_sha256: Text = key(says="of that file as read")
    offered: Text | None = key(None, says="the plan that was offered")
    offered_sha256: Text | None = key(None, says="of that file")
    written_at: Text = key(says="time of writing, UTC")
    by: Text | None = key(None, says="who changed it")
    because: Text | None = key(None, says="why, in words")
    aim: Text = key(says="aim of the wells that were chosen besides")
    seed: Whole = key(says="seed of choice and layout")
    wells: Whole = key(says="test wells of the plan")
    wrong_share: Number | None = key(None, says="share that may still be called wrongly after it")
    offered_wells: Whole | None = key(None, says="test wells of the plan that was offered")
    offered_wrong_share: Number | None = key(None, says="the same share after the offered plan")
    inputs: dict[str, Text] = key({}, says="SHA-256 of the study's files it rests on")
    changes: tuple[WellChange, ...] = key((), says="well by well")


def record_text(record: EditRecord) -> str:
    """Return a record as TOML."""
    lines = [_HEAD + _keys(record, ("inputs", "changes"))]
    inputs = [f"{toml_value(file)} = {toml_value(of)}\n" for file, of in record.inputs.items()]
    lines.append("[inputs]\n" + "".join(inputs))
    lines += ["[[changes]]\n" + _keys(change) for change in record.changes]
    return "\n".join(lines)


def _keys(model: BaseModel, without: tuple[str, ...] = ()) -> str:
    given = {n: v for n, v in model.model_dump().items() if n not in without and v is not None}
    return "".join(f"{name} = {toml_value(value)}\n" for name, value in given.items())


def record_path(plan: Path) -> Path:
    """Where the record of an edited plan lies: beside it."""
    return plan.with_name(plan.stem + ENDING)


def sha256(content: bytes) -> str:
    """Return the SHA-256 of a file's content."""
    return hashlib.sha256(content).hexdigest()


@dataclass(frozen=True)
class RecordedEdit:
    """A record that was read, and what is odd about it."""

    file: str
    record: EditRecord | None
    notices: tuple[str, ...]


def recorded_edits(folder: Path) -> Iterator[RecordedEdit]:
    """Yield the records of edited plans in plans/, in the order of their names."""
    for path in sorted((folder / PLANS).glob(f"*{ENDING}"), key=lambda p: natural_order(p.name)):
        file = f"{PLANS}/{path.name}"
        found = Findings()
        data = read_toml(path, file, EditRecord, found.faults)
        record = None if data is None else parse(EditRecord, data, file, found.faults)
        notices = [fault.text for fault in found.faults]
        if record is not None:
            notices += _altered(folder, record.plan, record.plan_sha256)
            if record.offered is not None and record.offered_sha256 is not None:
                notices += _altered(folder, record.offered, record.offered_sha256)
        yield RecordedEdit(file, record, tuple(notices))


def _altered(folder: Path, file: str, hashed: str) -> list[str]:
    """A notice where a file no longer reads as it did when the record was written."""
    path = folder / file
    if not path.is_file():
        return []
    try:
        same = sha256(path.read_bytes()) == hashed
    except OSError:
        return [f"{file} cannot be read"]
    return [] if same else [f"{file} was altered after its edit was recorded"]


def counts_text(record: EditRecord) -> str:
    """Return how much was changed: "2 changed, 1 left out"."""
    kinds = [change.kind for change in record.changes]
    said = [f"{kinds.count(kind)} {kind}" for kind in KINDS if kind in kinds]
    return ", ".join(said) or "nothing changed"
