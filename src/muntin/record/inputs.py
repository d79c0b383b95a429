"""The inputs of a study: the files that its numbers rest on, their hashes, and the versions."""

from __future__ import annotations

import hashlib
import platform
from collections.abc import Mapping
from importlib.metadata import version
from pathlib import Path

from muntin.record.definition import STUDY_FILE
from muntin.record.faults import Fault, StudyFaults
from muntin.record.stop_rule import STOP_FILE

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
        why = error.strerror or str(error)
        raise StudyFaults([Fault(file=str(folder), problem="cannot be read", hint=why)]) from None


def hashes(inputs: Mapping[str, bytes]) -> dict[str, str]:
    """Return the SHA-256 of each input file."""
    return {name: hashlib.sha256(content).hexdigest() for name, content in inputs.items()}


def versions() -> dict[str, str]:
    """Return the versions that the numbers depend on, and for which kind of processor the linear
    algebra is made, since others round otherwise.
    """
    made = {"python": platform.python_version()} | {name: version(name) for name in _PACKAGES}
    return made | {"processor": _processor()}


def _processor() -> str:
    import numpy  # noqa: F401 - it loads the linear algebra that is asked
    from threadpoolctl import threadpool_info

    blas = [pool for pool in threadpool_info() if pool["user_api"] == "blas"]
    kinds = {str(pool.get("architecture") or "") for pool in blas}
    return " ".join([platform.machine(), *sorted(kinds - {""})])
