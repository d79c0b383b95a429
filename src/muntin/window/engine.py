"""Which engine an assessment uses, and the draws that the reference engine leaves."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any, Literal

from muntin.record.faults import Fault, StudyFaults
from muntin.record.files import write_atomic
from muntin.surrogate.fit import Stack
from muntin.surrogate.nuts import Nuts
from muntin.surrogate.quiet import NotInstalledError, pymc

Engine = Literal["fast", "nuts"]


def settings_of(engine: Engine | Nuts, progress: bool) -> Nuts | None:
    """Settings of the engine nuts, None for the fast one.

    Raises ValueError for other names, StudyFaults where PyMC is not installed.
    """
    if engine == "fast":
        return None
    if engine != "nuts" and not isinstance(engine, Nuts):
        raise ValueError(f"engine {engine!r} is none of fast, nuts")
    try:
        pymc()
    except NotInstalledError as missing:
        raise StudyFaults([Fault(file="engine", problem=str(missing))]) from None
    settings = engine if isinstance(engine, Nuts) else Nuts()
    return replace(settings, progress=progress or settings.progress)


def inference_data_of(stacks: Mapping[str, Stack]) -> dict[str, dict[str, Any]]:
    """ArviZ data by response and surrogate; empty where nothing was sampled."""
    from muntin.surrogate.inference_data import inference_data

    found: dict[str, dict[str, Any]] = {}
    for response, stack in stacks.items():
        for fit in stack.fits:
            if fit.draws is not None:
                found.setdefault(response, {})[fit.name] = inference_data(fit.draws)
    return found


def save_draws(data: Mapping[str, Mapping[str, Any]], folder: Path) -> tuple[Path, ...]:
    """Write every surrogate's draws to <response>-<surrogate>.nc, each whole or not at all.

    Raises StudyFaults where there are no draws, or the folder cannot be written.
    """
    if not data:
        fault = Fault(file=str(folder), problem="gets no draws: only the engine nuts makes them")
        raise StudyFaults([fault])
    paths = []
    with TemporaryDirectory() as aside:
        part = Path(aside) / "draws.nc"
        for response, fits in data.items():
            for surrogate, one in fits.items():
                one.to_netcdf(str(part), engine="h5netcdf")
                paths.append(folder / f"{response}-{surrogate}.nc")
                write_atomic(paths[-1], part.read_bytes())
    return tuple(paths)
