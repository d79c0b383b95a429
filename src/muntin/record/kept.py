"""What the ledger's lines say of files that are to stay as they were written."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from muntin.record.column_plan import COLUMNS, plan_paths
from muntin.record.edits import ENDING, sha256
from muntin.record.ledger import LEDGER, Ledger, Line
from muntin.record.offers import OFFERED, PLANS
from muntin.record.tables import natural_order
from muntin.record.writing import topmost_missing, unfinished

ADVICE_FILE = "advice.json"
PAGE_RECORD = "report/report.json"
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
    latest = _latest(ledger, pending)
    deleted, handed = [], []
    for missing, line in _gone(folder, latest).items():
        # A page is there to be handed over, and nothing rests on it.
        if line.entry.command == "report":
            handed.append(f"{missing} is no longer there (written with {_since(line)})")
        else:
            deleted.append(f"{missing} was deleted (written with {_since(line)})")
    lost, older = _without_line(folder, ledger, latest, pending)
    differs = [*deleted, *_altered(folder, latest), *lost, *_other_chain(folder, ledger)]
    return Told(differs=tuple(differs), notes=(*handed, *older))


def _latest(ledger: Ledger, pending: tuple[str, ...]) -> dict[str, tuple[Line, str]]:
    """The last line that tells of each file that is to stay as it was written, with its hash."""
    latest: dict[str, tuple[Line, str]] = {}
    for line in ledger.sound:
        for name in line.entry.removed:
            latest.pop(name, None)
        latest |= {name: (line, of) for name, of in line.entry.results.items() if _stays(name)}
    return {
        name: told
        for name, told in latest.items()
        if not any(name == p or name.startswith(f"{p}/") for p in pending)
    }


def _stays(name: str) -> bool:
    # A page may be written outside the study, to be handed over; it is out of reach from here.
    if Path(name).is_absolute():
        return False
    if name.startswith(f"{PLANS}/"):
        return name.startswith(f"{PLANS}/{OFFERED}/") or name.endswith(ENDING)
    # The table of column runs is filled in; what was predicted of them stays.
    if name.startswith(f"{COLUMNS}/"):
        return name.endswith(".toml")
    return not name.startswith(_WORKED_ON)


def _since(line: Line) -> str:
    return f"line {line.number}, {line.time[:10]}"


def _gone(folder: Path, latest: Mapping[str, tuple[Line, str]]) -> dict[str, Line]:
    """What is there no more: the topmost parts of paths, each with a line that tells of it."""
    gone: dict[str, Line] = {}
    for name, (line, _) in latest.items():
        if not (folder / name).is_file():
            gone.setdefault(topmost_missing(folder, name), line)
    return gone


def _altered(folder: Path, latest: Mapping[str, tuple[Line, str]]) -> Iterator[str]:
    for name, (line, of) in latest.items():
        path = folder / name
        if path.is_file() and sha256(path.read_bytes()) != of:
            yield f"{name} was altered after it was written ({_since(line)})"


def advice_folders(folder: Path) -> list[Path]:
    """Return the folders of advice in a study, oldest plate and revision first."""
    found = [path.parent for path in (folder / "advice").glob(f"*/r*/{ADVICE_FILE}")]
    return sorted(found, key=lambda path: natural_order(path.relative_to(folder).as_posix()))


def _without_line(
    folder: Path, ledger: Ledger, latest: Mapping[str, object], pending: tuple[str, ...]
) -> tuple[list[str], list[str]]:
    """Advice, pages and plans that no line tells of: since the ledger began, and older ones."""
    paths = [*_placed(folder), *sorted((folder / PLANS / OFFERED).glob("*.csv"))]
    names = [path.relative_to(folder).as_posix() for path in (*paths, *plan_paths(folder))]
    left = [name for name in names if name not in latest]
    left = [name for name in left if not any(name.startswith(p) for p in pending)]
    began = ledger.sound[0].time if ledger.sound else ""
    lost, notes = [], []
    for name in left:
        shown = name.removesuffix(f"/{ADVICE_FILE}")
        if ledger.texts and (_names_a_line(folder / name) or _written(folder / name) >= began):
            lost.append(f"{shown} is on no line of {LEDGER}: its line was deleted or edited")
        else:
            notes.append(f"{shown} is on no line of {LEDGER}; it is older than that")
    return lost, notes


def _names_a_line(path: Path) -> bool:
    """Whether a record says itself which line tells of it."""
    return isinstance(read_advice(path).get("ledger"), dict)


def _written(path: Path) -> str:
    """When a file was written: as it says itself, else as the disk says."""
    said = read_advice(path).get("written_at") if path.suffix == ".json" else None
    if path.suffix == ".toml":
        with suppress(OSError, ValueError):
            said = tomllib.loads(path.read_text(encoding="utf-8")).get("written_at")
    if isinstance(said, str):
        return said
    when = datetime.fromtimestamp(path.stat().st_mtime, UTC)
    return when.isoformat(timespec="seconds")


def _placed(folder: Path) -> list[Path]:
    """The records that say which line tells of them: of advice, and of the page."""
    advice = [path / ADVICE_FILE for path in advice_folders(folder)]
    page = folder / PAGE_RECORD
    return [*advice, *([page] if read_advice(page).get("ledger") else [])]


def read_advice(path: Path) -> dict[str, Any]:
    """Return what an advice.json, or the record of a page, holds; nothing where it cannot be
    read.
    """
    try:
        facts = json.loads(path.read_bytes())
    except (OSError, ValueError):
        return {}
    return facts if isinstance(facts, dict) else {}


def _other_chain(folder: Path, ledger: Ledger) -> Iterator[str]:
    """Records that were written after another line than the one that stands there now."""
    by_number = {line.number: line for line in ledger.sound}
    for path in _placed(folder):
        place = read_advice(path).get("ledger")
        if not isinstance(place, dict):
            continue
        line = by_number.get(place.get("line", 0))
        if line is not None and line.before != place.get("before"):
            shown = path.relative_to(folder).as_posix().removesuffix(f"/{ADVICE_FILE}")
            yield (
                f"{LEDGER} was written anew: {shown} was line {line.number} after another line "
                "than the one that stands before it now"
            )
