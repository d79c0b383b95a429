"""The page on disk, with its record and its figures beside it; files of others are left alone."""

from __future__ import annotations

import json
import os
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from muntin.record.edits import sha256
from muntin.record.faults import Fault, StudyFaults
from muntin.record.files import write_together, written_together
from muntin.record.ledger import LEDGER, Entry
from muntin.record.writing import writing
from muntin.report.advice_files import json_text
from muntin.report.page.build import Page

REPORT = "report"
_ENDINGS = (".html", ".htm")


@dataclass(frozen=True, kw_only=True)
class PagePlace:
    """Where a page goes: the page, its record, the folder of its figures."""

    page: Path
    record: Path
    figures: Path

    def inside(self, folder: Path) -> bool:
        """Whether the page lies in a study's folder."""
        return self.page.parent.resolve().is_relative_to(folder.resolve())


def page_place(folder: Path, out: Path | None = None) -> PagePlace:
    """Return where the page of a study goes: report/report.html in it, or `out`.

    Raises StudyFaults where `out` is no .html, or lies in a file's place.
    """
    page = folder / REPORT / f"{REPORT}.html" if out is None else out
    if page.suffix.lower() not in _ENDINGS:
        problem, hint = "cannot be written; the page is an .html", f"name it {page.stem}.html"
        raise StudyFaults([Fault(file=str(page), problem=problem, hint=hint)])
    if page.is_dir():
        raise StudyFaults([Fault(file=str(page), problem="is a folder, not a page")])
    stem = page.stem
    record = page.with_name(f"{stem}.json")
    return PagePlace(page=page, record=record, figures=page.with_name(f"{stem}-figures"))


def page_files(place: PagePlace, page: Page) -> dict[Path, str | bytes]:
    """Return the page and its figures by path, without the record."""
    figures = {place.figures / f"{f.name}.png": f.png for f in page.figures}
    return {place.page: page.html, **figures}


def check_place(folder: Path, place: PagePlace) -> None:
    """Raise StudyFaults where writing would replace a file that muntin did not write, or that was
    changed since, and where the page of a study belongs into a folder that cannot be written.
    """
    if not os.access(folder, os.W_OK) and place.inside(folder):
        hint = "name a place elsewhere with --out"
        raise StudyFaults([Fault(file=str(folder), problem="cannot be written", hint=hint)])
    there = [p for p in (place.page, place.record) if p.exists()]
    there += sorted(place.figures.glob("*.png")) if place.figures.is_dir() else []
    own = _own(place)
    faults = [
        Fault(
            file=str(path),
            problem="is not as muntin report wrote it, and is left as it is",
            hint="move it away, or name another place with --out",
        )
        for path in there
        if not _untouched(path, own)
    ]
    if faults:
        raise StudyFaults(faults)


@dataclass(frozen=True, kw_only=True)
class WrittenPage:
    """What was written: page, record and figures by path; the line of the ledger that tells of it,
    as its number and the hash of the line before (None: there is none); remarks for the user.
    """

    paths: tuple[Path, ...]
    ledger: Mapping[str, Any] | None
    remarks: tuple[str, ...]


def write_page(folder: Path, place: PagePlace, page: Page, entry: Entry) -> WrittenPage:
    """Write page, figures and record with their line in the ledger of the study, all or none.

    Figures of an earlier page that are drawn no more are removed. A page that goes elsewhere is
    written also where the study's folder cannot be, without a line. Raises StudyFaults as
    `check_place` does, and where a place cannot be written.
    """
    if not os.access(folder, os.W_OK):
        check_place(folder, place)
        files, stale = _files(place, page, None)
        write_together(files)
        _remove(stale)
        remark = f"{folder} cannot be written: {LEDGER} has no line about this page."
        return _written(place, files, None, (remark,))
    with writing(folder) as pen:
        check_place(folder, place)
        ledger = {"line": pen.ledger.next_number, "before": pen.ledger.last_hash}
        files, stale = _files(place, page, ledger)
        if place.inside(folder):
            # Below the folder as it is given, whatever way --out came there.
            near = place.page.parent
            base = folder / near.resolve().relative_to(folder.resolve())
            kept = {base / path.relative_to(near): content for path, content in files.items()}
            pen.commit(kept, entry, [base / path.relative_to(near) for path in stale])
        else:
            digests = {path.absolute().as_posix(): _digest(of) for path, of in files.items()}
            with written_together(files):
                pen.commit({}, replace(entry, results=digests))
            _remove(stale)
        return _written(place, files, ledger, tuple(pen.remarks))


def _files(
    place: PagePlace, page: Page, ledger: Mapping[str, Any] | None
) -> tuple[dict[Path, str | bytes], list[Path]]:
    """What is to be written, and which figures of an earlier page are to go."""
    files, before = page_files(place, page), _own(place)
    stale = [
        path
        for path in before
        if path.parent == place.figures and path not in files and path.is_file()
    ]
    gone = [path for path in stale if _untouched(path, before)]
    # The record goes first: whenever writing is cut off, every file there is one that it knows.
    return {place.record: _record(place, page, files, before, ledger), **files}, gone


def _remove(paths: Iterable[Path]) -> None:
    for path in paths:
        path.unlink(missing_ok=True)


def _written(
    place: PagePlace,
    files: Iterable[Path],
    ledger: Mapping[str, Any] | None,
    remarks: tuple[str, ...],
) -> WrittenPage:
    own = (place.page, place.record)
    paths = (*own, *(path for path in files if path not in own))
    return WrittenPage(paths=paths, ledger=ledger, remarks=remarks)


def _record(
    place: PagePlace,
    page: Page,
    files: Mapping[Path, str | bytes],
    before: Mapping[Path, tuple[str, ...]],
    ledger: Mapping[str, Any] | None,
) -> str:
    def name(path: Path) -> str:
        return path.relative_to(place.page.parent).as_posix()

    written = {name(path): _digest(content) for path, content in files.items()}
    own = [path for path in before if path != place.record and path.is_file()]
    replaced = {name(path): _digest(path.read_bytes()) for path in own}
    return json_text({**page.facts, "ledger": ledger, "written": written, "replaced": replaced})


def _digest(content: str | bytes) -> str:
    return sha256(content.encode("utf-8") if isinstance(content, str) else content)


def _own(place: PagePlace) -> dict[Path, tuple[str, ...]]:
    """The digests with which each file was written, none of the record itself; empty where there
    is no record, or none of ours.
    """
    try:
        record: Any = json.loads(place.record.read_bytes())
    except (OSError, ValueError):
        return {}
    if not isinstance(record, dict) or record.get("command") != "report":
        return {}
    found: dict[Path, tuple[str, ...]] = {place.record: ()}
    for key in ("written", "replaced"):
        told = record.get(key)
        for name, digest in told.items() if isinstance(told, dict) else ():
            path = place.page.parent / str(name)
            found[path] = (*found.get(path, ()), str(digest))
    return found


def _untouched(path: Path, own: Mapping[Path, tuple[str, ...]]) -> bool:
    """Whether a file is as it was written; a record is where it reads as one."""
    if path not in own:
        return False
    try:
        return not own[path] or _digest(path.read_bytes()) in own[path]
    except OSError:
        return False
