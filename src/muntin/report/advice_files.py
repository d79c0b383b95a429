"""Advice on disk: one folder a revision, made whole or not at all."""

from __future__ import annotations

import hashlib
import json
import platform
import secrets
import shutil
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

from muntin.record.definition import STUDY_FILE
from muntin.record.faults import Fault, StudyFaults
from muntin.record.files import write_atomic
from muntin.record.stop_rule import STOP_FILE
from muntin.report.facts import plain
from muntin.report.plan_files import ADVICE, PLAN_COPY, plan_path

_TABLES = (".csv", ".xlsx")
_INPUTS = {"plates": (*_TABLES, ".toml"), "results": _TABLES, "stocks": _TABLES}
_PACKAGES = ("muntin", "numpy", "scipy", "pandas")


def input_paths(folder: Path) -> list[Path]:
    """Return the input files of a study: study.toml, the stop rule on record, then plates, results
    and stocks.
    """
    recorded = folder / STOP_FILE
    paths = [folder / STUDY_FILE, *([recorded] if recorded.is_file() else [])]
    for name, endings in _INPUTS.items():
        here = sorted((folder / name).iterdir()) if (folder / name).is_dir() else []
        paths += [
            path
            for path in here
            if path.suffix.lower() in endings and path.is_file() and path.name[0] not in ".~"
        ]
    return paths


def read_inputs(folder: Path) -> dict[str, bytes]:
    """Return the content of a study's input files by their path in it. Raises StudyFaults."""
    try:
        return {p.relative_to(folder).as_posix(): p.read_bytes() for p in input_paths(folder)}
    except OSError as error:
        raise _fault(folder, "cannot be read", error) from None


def hashes(inputs: Mapping[str, bytes]) -> dict[str, str]:
    """Return the SHA-256 of each input file."""
    return {name: hashlib.sha256(content).hexdigest() for name, content in inputs.items()}


def versions() -> dict[str, str]:
    """Return the versions that the numbers depend on."""
    return {"python": platform.python_version()} | {name: version(name) for name in _PACKAGES}


def json_text(facts: Mapping[str, Any]) -> str:
    """Return facts as a JSON document."""
    return json.dumps(plain(facts), ensure_ascii=False, indent=2, allow_nan=False) + "\n"


@dataclass(frozen=True, kw_only=True)
class Place:
    """Where an advice goes: the plan's table, the folder of the revision, a remark for the user."""

    plan: Path
    folder: Path
    remark: str

    def facts(self) -> dict[str, str]:
        """Return the place as plain values."""
        return {"plan": str(self.plan), "advice": str(self.folder), "remark": self.remark}


def find_place(folder: Path, plate: str, plan_text: str) -> Place:
    """Return where the advice on a plate goes: the next free revision, r1, r2, ..."""
    plan, remark = plan_path(folder, plate, plan_text)
    number = 1
    while (revision := folder / ADVICE / plate / f"r{number}").exists():
        number += 1
    return Place(plan=plan, folder=revision, remark=remark)


def write_advice(place: Place, plan_text: str, files: Mapping[str, str | bytes]) -> None:
    """Write the files of a revision (by path in it), a copy of the plan, and the plan itself.

    Raises StudyFaults where a place cannot be written; the revision is then not there.
    """
    with new_folder(place.folder) as part:
        for name, content in {**files, PLAN_COPY: plan_text}.items():
            write_atomic(part / name, content)
        write_atomic(place.plan, plan_text)


@contextmanager
def new_folder(target: Path) -> Iterator[Path]:
    """Give a temporary folder beside `target` that takes its name once the block has ended well.

    Where the block fails nothing is left behind. Raises StudyFaults where it cannot be written.
    """
    part = target.with_name(f".{target.name}.{secrets.token_hex(4)}.part")
    missing = [p for p in (target.parent, *target.parent.parents) if not p.exists()]
    try:
        part.mkdir(parents=True)
        yield part
        part.rename(target)
    except OSError as error:
        raise _fault(target, "cannot be written", error) from None
    finally:
        if part.exists():
            shutil.rmtree(part, ignore_errors=True)
        for made in missing:
            if made.is_dir() and not any(made.iterdir()):
                made.rmdir()


def _fault(path: Path, problem: str, error: OSError) -> StudyFaults:
    return StudyFaults([Fault(file=str(path), problem=problem, hint=error.strerror or str(error))])
