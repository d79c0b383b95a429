"""Finished series on disk: one file each, written whole, taken up again by the next start."""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Mapping
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

from muntin.record.faults import Fault, StudyFaults
from muntin.record.files import write_atomic
from muntin.record.study import Study
from muntin.rehearsal.played import Series

FOLDER = "rehearsals"
# Raised whenever a series is played otherwise than before.
_FORM = 2
_PACKAGES = ("muntin", "numpy", "scipy", "pandas")


@dataclass(frozen=True)
class Store:
    """The folder of one rehearsal: a study's contents, settings and seed have one of their own."""

    folder: Path

    @classmethod
    def of(cls, folder: Path, study: Study, settings: Mapping[str, Any]) -> Store:
        """The store below a folder, keyed by the study and the settings."""
        return cls(folder / key_of(study, settings))

    def path(self, number: int) -> Path:
        """The file of a series."""
        return self.folder / f"series-{number + 1:04d}.json"

    def write(self, series: Series) -> None:
        """Write one series. Raises StudyFaults where the folder cannot be written."""
        plain = series.to_dict()
        text = json.dumps({"series": plain, "sha256": _sum(plain)}, indent=1) + "\n"
        write_atomic(self.path(series.number), text)

    def digests(self, count: int, base: Path) -> dict[str, str]:
        """The SHA-256 of the first `count` series that are there, by path below `base`."""
        paths = [path for path in map(self.path, range(count)) if path.is_file()]
        return {
            os.path.relpath(path, base).replace(os.sep, "/"): hashlib.sha256(
                path.read_bytes()
            ).hexdigest()
            for path in paths
        }

    def take_up(self, count: int, names: tuple[str, ...]) -> tuple[list[Series], list[str]]:
        """The first `count` series as far as they are there, and the files that are spoilt.

        names: the designs that a series holds. Raises StudyFaults where a file cannot be read.
        """
        found, spoilt = [], []
        for number in range(count):
            path = self.path(number)
            if not path.is_file():
                continue
            series = _read(path)
            if series is None or series.number != number or tuple(series.designs) != names:
                spoilt.append(f"{self.folder.name}/{path.name}")
            else:
                found.append(series)
        return found, spoilt


def key_of(study: Study, settings: Mapping[str, Any]) -> str:
    """Sixteen hexadecimal digits of what a series depends on.

    The study's definition but for [stop], which is held against series after they were played, and
    [columns], of which they know nothing; its wells and plates; the settings; the versions of the
    packages that the numbers come from.
    """
    plates = [plate.model_dump_json() for plate in study.plates]
    parts = {
        "form": _FORM,
        "definition": study.definition.model_dump_json(exclude={"stop", "columns"}),
        "wells": study.wells.to_json(orient="split", double_precision=15, default_handler=str),
        "plates": plates,
        "settings": dict(settings),
        "versions": {name: version(name) for name in _PACKAGES},
    }
    return _sum(parts)[:16]


def _sum(plain: Mapping[str, Any]) -> str:
    return hashlib.sha256(json.dumps(plain, sort_keys=True).encode()).hexdigest()


def _read(path: Path) -> Series | None:
    """The series in a file; None where the file is spoilt."""
    try:
        raw = path.read_bytes()
    except OSError as error:
        why = error.strerror or str(error)
        fault = Fault(file=str(path), problem="cannot be read", hint=why)
        raise StudyFaults([fault]) from None
    try:
        whole = json.loads(raw)
        if whole["sha256"] != _sum(whole["series"]):
            return None
        return Series.from_dict(whole["series"])
    except (ValueError, KeyError, TypeError, AttributeError):
        return None
