"""What the ledger's lines say of files that are to stay as they were written."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from muntin.record.edits import ENDING, sha256
from muntin.record.ledger import LEDGER, Ledger, Line
from muntin.record.offers import OFFERED, PLANS
from muntin.record.tables import natural_order
from muntin.record.writing import topmost_missing, unfinished

ADVICE_FILE = "advice.json"
# Their files are worked on: filled in, moved, edited.
_WORKED_ON = ("sheets/", "results/")


@dataclass(frozen=True, kw_only=True)
class Told:
    """What differs, and what is only to be noted, one sentence each."""

    differs: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


def kept_files(folder: Path, ledger: Ledger) -> Told:
    """Hold files against the lines that tell of them, and look for files without a line."""
    pending = unfinished(folder)
    latest = {
        name: (line, of)
        for line in ledger.sound
        for name, of in line.entry.results.items()
        if _stays(name) and not any(name == p or name.startswith(f"{p}/") for p in pending)
    }
    differs = [*_gone_or_altered(folder, latest)]
    lost, notes = _without_line(folder, ledger, latest, pending)
    return Told(differs=(*differs, *lost, *_other_chain(folder, ledger)), notes=tuple(notes))


def _stays(name: str) -> bool:
    if name.startswith(f"{PLANS}/"):
        return name.startswith(f"{PLANS}/{OFFERED}/") or name.endswith(ENDING)
    return not name.startswith(_WORKED_ON)


def _gone_or_altered(folder: Path, latest: Mapping[str, tuple[Line, str]]) -> Iterator[str]:
    gone: set[str] = set()
    for name, (line, of) in latest.items():
        path, since = folder / name, f"line {line.number}, {line.time[:10]}"
        if not path.is_file():
            missing = topmost_missing(folder, name)
            if missing not in gone:
                yield f"{missing} was deleted (written with {since})"
            gone.add(missing)
        elif sha256(path.read_bytes()) != of:
            yield f"{name} was altered after it was written ({since})"


def advice_folders(folder: Path) -> list[Path]:
    """Return the folders of advice in a study, oldest plate and revision first."""
    found = [path.parent for path in (folder / "advice").glob(f"*/r*/{ADVICE_FILE}")]
    return sorted(found, key=lambda path: natural_order(path.relative_to(folder).as_posix()))


def _without_line(
    folder: Path, ledger: Ledger, latest: Mapping[str, object], pending: tuple[str, ...]
) -> tuple[list[str], list[str]]:
    """Advice and offered plans that no line tells of: since the ledger began, and older ones."""
    names = [f"{p.relative_to(folder).as_posix()}/{ADVICE_FILE}" for p in advice_folders(folder)]
    offered = sorted((folder / PLANS / OFFERED).glob("*.csv"))
    names += [path.relative_to(folder).as_posix() for path in offered]
    left = [name for name in names if name not in latest]
    left = [name for name in left if not any(name.startswith(p) for p in pending)]
    began = ledger.sound[0].time if ledger.sound else ""
    lost, notes = [], []
    for name in left:
        shown = name.removesuffix(f"/{ADVICE_FILE}")
        if ledger.texts and _written(folder / name) >= began:
            lost.append(f"{shown} is on no line of {LEDGER}: its line was deleted or edited")
        else:
            notes.append(f"{shown} is on no line of {LEDGER}; it is older than that")
    return lost, notes


def _written(path: Path) -> str:
    """When a file was written: as it says itself, else as the disk says."""
    said = read_advice(path).get("written_at") if path.name == ADVICE_FILE else None
    if isinstance(said, str):
        return said
    when = datetime.fromtimestamp(path.stat().st_mtime, UTC)
    return when.isoformat(timespec="seconds")


def read_advice(path: Path) -> dict[str, Any]:
    """Return what an advice.json holds; nothing where it cannot be read."""
    try:
        facts = json.loads(path.read_bytes())
    except (OSError, ValueError):
        return {}
    return facts if isinstance(facts, dict) else {}


def _other_chain(folder: Path, ledger: Ledger) -> Iterator[str]:
    """Advice that was written after another line than the one that stands there now."""
    by_number = {line.number: line for line in ledger.sound}
    for path in advice_folders(folder):
        place = read_advice(path / ADVICE_FILE).get("ledger")
        if not isinstance(place, dict):
            continue
        line = by_number.get(place.get("line", 0))
        if line is not None and line.before != place.get("before"):
            shown = path.relative_to(folder).as_posix()
            yield (
                f"{LEDGER} was written anew: {shown} was line {line.number} after another line "
                "than the one that stands before it now"
            )
