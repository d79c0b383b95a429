"""Writing: the files of a command and their line in the ledger, all of them or none.

Everything is first written, flushed, into a hidden folder of the study, the ledger with its new
line among it. A list of what is to be moved is the point of no return: a process killed before it
has changed nothing, and what one killed after it has begun is finished by the next that writes.
After that point files only change their names, which takes no room on the disk.
"""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager, suppress
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from hashlib import sha256
from pathlib import Path

from muntin.record.faults import Fault, StudyFaults
from muntin.record.ledger import LEDGER, Entry, Ledger, Line, line_after, read_ledger
from muntin.record.lock import locked

STAGE = ".writing"
_NEW, _OLD, _READY = "new", "old", "ready.json"
_TORN = "ledger-torn-{}.txt"


@dataclass(frozen=True, kw_only=True)
class _List:
    """What is to be done: paths in the study that are moved into place, and that are taken away."""

    moves: tuple[str, ...]
    removes: tuple[str, ...]


class Writing:
    """The right to write to a study, while its lock is held; made by `writing`.

    remarks: what the user should know of earlier commands. moment: the time of its line, UTC.
    """

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.moment = datetime.now(UTC).isoformat(timespec="seconds")
        self.remarks: list[str] = finished(folder)
        self._ledger = read_ledger(folder)

    @property
    def ledger(self) -> Ledger:
        """The ledger as it stands."""
        return self._ledger

    def commit(
        self,
        files: Mapping[Path, str | bytes],
        entry: Entry,
        removed: Iterable[Path] = (),
    ) -> Line:
        """Write files (paths below the study's folder) and their line; take others away.

        The hashes of the files join the results of the entry, and it names what was taken away.
        Raises StudyFaults where something cannot be written; all is then as it was.
        """
        data = {_inside(self.folder, path): _bytes(content) for path, content in files.items()}
        aside = self._torn_aside()
        gone = [_inside(self.folder, path) for path in removed]
        results = {**entry.results, **_hashed(data), **_hashed(aside)}
        entry = replace(entry, results=results, removed=(*entry.removed, *gone))
        line = line_after(self._ledger, entry, self.moment)
        texts = (*self._ledger.texts, line.text)
        ledger = "".join(f"{text}\n" for text in texts).encode("utf-8", "surrogateescape")
        _write_all(self.folder, {**data, **aside, LEDGER: ledger}, gone)
        self.remarks += [_torn_remark(name) for name in aside]
        self._ledger = read_ledger(self.folder)
        return line

    def _torn_aside(self) -> dict[str, bytes]:
        """Where the torn end of the ledger goes, if it has one."""
        if not self._ledger.torn:
            return {}
        number = 1
        while (self.folder / _TORN.format(number)).exists():
            number += 1
        return {_TORN.format(number): self._ledger.torn}


@contextmanager
def writing(folder: Path) -> Iterator[Writing]:
    """Give the right to write to a study; others wait for it, and a killed command is finished.

    Raises StudyFaults where the folder cannot be written or another process does not give it up.
    """
    with locked(folder):
        yield Writing(folder)


def unfinished(folder: Path) -> tuple[str, ...]:
    """The paths that a killed command was about to move into place; none where there is none."""
    listed = _read_list(folder / STAGE / _READY)
    return () if listed is None else (*listed.moves, *listed.removes)


def unfinished_notice(folder: Path) -> str:
    """Return a sentence on what a killed command left, "" where it left nothing."""
    left = unfinished(folder)
    if not left:
        return ""
    return (
        f"a command was killed while it wrote {_some(left)}; the next one that writes finishes it"
    )


def finished(folder: Path) -> list[str]:
    """Finish what a killed command began, or take away what it only prepared; return remarks.

    To be called while the lock is held. Raises StudyFaults where it cannot be done.
    """
    stage = folder / STAGE
    if not stage.exists():
        return []
    remarks = []
    try:
        listed = _read_list(stage / _READY)
        if listed is not None:
            remarks = [f"An earlier command was killed while it wrote {_some(listed.moves)}: done."]
            remarks += _keep_changed(folder, listed)
            _carry_out(folder, listed)
        _clear(stage)
    except OSError as error:
        raise _fault(folder, error) from None
    return remarks


def _some(moves: tuple[str, ...]) -> str:
    own = [name for name in moves if name != LEDGER]
    return own[0] if own else LEDGER


def _torn_remark(name: str) -> str:
    return f"The last line of {LEDGER} was torn; it is set aside in {name}."


def _hashed(data: Mapping[str, bytes]) -> dict[str, str]:
    return {name: sha256(content).hexdigest() for name, content in data.items()}


def _inside(folder: Path, path: Path) -> str:
    return path.relative_to(folder).as_posix()


def _bytes(content: str | bytes) -> bytes:
    return content.encode("utf-8", "surrogateescape") if isinstance(content, str) else content


def _write_all(folder: Path, data: Mapping[str, bytes], removed: Iterable[str]) -> None:
    """Write files and take others away, all of it or none."""
    stage = folder / STAGE
    try:
        listed = _prepared(folder, data, removed)
    except OSError as error:
        _clear(stage)
        raise _fault(folder, error) from None
    except BaseException:
        _clear(stage)
        raise
    try:
        _carry_out(folder, listed)
    except OSError as error:
        _take_back(folder, listed)
        raise _fault(folder, error) from None
    with suppress(OSError):
        _clear(stage)


def _prepared(folder: Path, data: Mapping[str, bytes], removed: Iterable[str]) -> _List:
    """Write all that is new, and copies of what it replaces, into the stage; then the list."""
    stage = folder / STAGE
    _check_ways(folder, data)
    for name, content in data.items():
        _put(stage / _NEW / name, content)
    gone = tuple(name for name in removed if (folder / name).is_file())
    for name in (*data, *gone):
        if (folder / name).is_file():
            _put(stage / _OLD / name, (folder / name).read_bytes())
    # The ledger comes last, so that a reader finds no line of files that are not there yet.
    names = sorted(data, key=lambda name: name == LEDGER)
    moves = tuple(dict.fromkeys(topmost_missing(folder, name) for name in names))
    listed = _List(moves=moves, removes=gone)
    text = json.dumps({"moves": moves, "removes": gone})
    _put(stage / f"{_READY}.part", text.encode("utf-8"))
    _flush_folder(stage)
    (stage / f"{_READY}.part").replace(stage / _READY)
    _flush_folder(stage)
    return listed


def topmost_missing(folder: Path, name: str) -> str:
    """Return the first part of a path that is not there, or the whole path: what moves at once."""
    parts = name.split("/")
    for count in range(1, len(parts)):
        if not (folder / "/".join(parts[:count])).exists():
            return "/".join(parts[:count])
    return name


def _check_ways(folder: Path, names: Iterable[str]) -> None:
    """Raise StudyFaults where a file lies on the way to a place."""
    ways = {parent for name in names for parent in (folder / name).parents}
    blocked = sorted(way for way in ways if way.is_relative_to(folder) and way.is_file())
    problem = "is a file where a folder belongs"
    faults = [Fault(file=str(way), problem=problem, hint="move it away") for way in blocked]
    if faults:
        raise StudyFaults(faults)


def _put(path: Path, content: bytes) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    with path.open("wb") as stream:
        stream.write(content)
        stream.flush()
        os.fsync(stream.fileno())


def _flush_folder(path: Path) -> None:
    """Flush the names in a folder, where the operating system can do that."""
    with suppress(OSError, AttributeError):
        descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)


def _carry_out(folder: Path, listed: _List) -> None:
    """Move into place what is not there yet, and take away what is to go."""
    stage = folder / STAGE
    for name in listed.moves:
        if (stage / _NEW / name).exists():
            (stage / _NEW / name).replace(folder / name)
    for name in listed.removes:
        (folder / name).unlink(missing_ok=True)
    for parent in {(folder / name).parent for name in listed.moves}:
        _flush_folder(parent)


def _take_back(folder: Path, listed: _List) -> None:
    """Undo what was moved, and put copies of what was there in its place; then forget the list."""
    stage = folder / STAGE
    for name in listed.moves:
        if not (stage / _NEW / name).exists():
            (folder / name).replace(stage / _NEW / name)
    for name in (*listed.moves, *listed.removes):
        if (stage / _OLD / name).is_file() and not (folder / name).exists():
            (stage / _OLD / name).replace(folder / name)
    _clear(stage)


def _keep_changed(folder: Path, listed: _List) -> list[str]:
    """Set aside what somebody changed since a command was killed; return remarks."""
    stage, remarks = folder / STAGE, []
    for name in listed.moves:
        there, old = folder / name, stage / _OLD / name
        if not (stage / _NEW / name).exists() or not there.exists():
            continue
        if there.is_file() and old.is_file() and there.read_bytes() == old.read_bytes():
            continue
        number = 1
        while (aside := there.with_name(f"{there.name}.aside-{number}")).exists():
            number += 1
        there.replace(aside)
        remarks.append(f"{name} was changed since; your version is {aside.name} beside it.")
    return remarks


def _clear(stage: Path) -> None:
    """Take the stage away, its list first, so that no half of it is ever carried out."""
    (stage / _READY).unlink(missing_ok=True)
    shutil.rmtree(stage, ignore_errors=True)


def _read_list(path: Path) -> _List | None:
    try:
        values = json.loads(path.read_bytes())
    except (FileNotFoundError, NotADirectoryError):
        return None
    except ValueError:
        hint = f"what a killed command wrote lies in {path.parent}; move it away"
        raise StudyFaults([Fault(file=str(path), problem="is spoilt", hint=hint)]) from None
    return _List(moves=tuple(values["moves"]), removes=tuple(values["removes"]))


def _fault(folder: Path, error: OSError) -> StudyFaults:
    why, shown = error.strerror or str(error), str(folder)
    if isinstance(error.filename, str):
        shown = error.filename.replace(f"{STAGE}/{_NEW}/", "").replace(f"{STAGE}/{_OLD}/", "")
    return StudyFaults([Fault(file=shown, problem="cannot be written", hint=why)])
