"""Uptake tables (uptake/*.csv): load or liquid concentration against contact time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from muntin.record.cells import CellError, numbers, parse_reading, reasons
from muntin.record.faults import Fault, Findings, StudyFaults, counted, listed, nearest, number
from muntin.record.keys import Floats
from muntin.record.tables import SUFFIXES, Table, missing_column, read_table, table_files
from muntin.record.uptake_keys import UptakeKeys

FOLDER = "uptake"
_KNOWN = ("time_min", "load", "liquid", "sd", "exclude")
_HEADER = "expected header: time_min,load or time_min,liquid; if you have it sd, exclude"


@dataclass(frozen=True, kw_only=True, eq=False)
class Curve:
    """Readings of one uptake curve, in the order of time; arrays have shape (readings,).

    `times` in min; `loads` and their standard uncertainties `sds` in mg/mL resin, sd 0 where none
    is given; `sides` 0 for a reading, -1 where the load lies below the limit in `loads`, 1 where
    above. `offered` is the protein offered in mg/mL resin, None where it is not known.
    """

    name: str
    file: str
    times: Floats
    loads: Floats
    sds: Floats
    sides: Floats
    offered: float | None = None
    notices: tuple[str, ...] = ()

    @property
    def distinct(self) -> Floats:
        """The different times above 0, in min."""
        return np.unique(self.times[self.times > 0])


def uptake_paths(folder: Path, wanted: str | None) -> list[tuple[str, Path]]:
    """Return name and path of the tables to judge: all in uptake/, or the one that is named.

    `wanted` is a name with or without its ending in uptake/, or a path. Raises StudyFaults where
    there is no table, with the nearest name.
    """
    found = Findings()
    if wanted is not None and Path(wanted).suffix.lower() in SUFFIXES and Path(wanted).is_file():
        return [(Path(wanted).stem, Path(wanted))]
    tables = table_files(folder / FOLDER, found)
    chosen = [(n, p) for n, p in tables if wanted is None or wanted in (n, p.name)]
    if not chosen and not found.faults:
        found.faults.append(_no_table(folder, wanted, [path.name for _, path in tables]))
    if found.faults:
        raise StudyFaults(found.faults)
    return chosen


def _no_table(folder: Path, wanted: str | None, names: Sequence[str]) -> Fault:
    if wanted is None:
        problem = "holds no table of an uptake curve"
        hint = "write time_min,load or time_min,liquid to uptake/curve.csv"
        return Fault(file=str(folder / FOLDER), problem=problem, hint=hint)
    close = nearest(wanted, [*(Path(name).stem for name in names), *names])
    known = f"did you mean {close}?" if close else f"known: {listed(names)}" if names else ""
    return Fault(file=wanted, problem=f"is no table and none in {folder / FOLDER}", hint=known)


def read_curves(folder: Path, keys: UptakeKeys, wanted: str | None = None) -> tuple[Curve, ...]:
    """Return the uptake curves of a study; nothing is written.

    Raises StudyFaults with every fault of every table.
    """
    faults: list[Fault] = []
    curves = []
    for name, path in uptake_paths(folder, wanted):
        inside = path.parent == folder / FOLDER
        found = Findings()
        file = f"{FOLDER}/{path.name}" if inside else str(path)
        table = read_table(path, file, _KNOWN, found)
        if table is not None and _has_columns(table, keys, found):
            curve = _curve(name, table, keys, found)
            curves.append(curve)
        faults += found.faults
    if faults:
        raise StudyFaults(faults)
    return tuple(curves)


def _has_columns(table: Table, keys: UptakeKeys, found: Findings) -> bool:
    known = [name for name in ("load", "liquid") if name in table.columns]
    faults = []
    if "time_min" not in table.columns:
        faults.append(missing_column(table, "time_min", _HEADER))
    if not known:
        other = next((name for name in table.columns if nearest(name, ("liquid",))), None)
        faults.append(missing_column(table, "liquid" if other else "load", _HEADER))
    if len(known) == 2:
        problem = "load and liquid are both there; keep the one that was measured"
        faults.append(Fault(file=table.file, problem=problem))
    if known == ["liquid"] and keys.offered is None:
        lacking = [n for n in ("feed_mg_per_ml", "phase_ratio") if getattr(keys, n) is None]
        problem = f"needs {' and '.join(lacking)} in [uptake] of study.toml to tell the load"
        faults.append(Fault(file=table.file, column="liquid", problem=problem))
    found.faults.extend(faults)
    return not faults


def _curve(name: str, table: Table, keys: UptakeKeys, found: Findings) -> Curve:
    what = "load" if "load" in table.columns else "liquid"
    times, sds = _times(table, found), _sds(table, found)
    states, values = _readings(table, what, found)
    why = reasons(table, "exclude", found.faults)
    out = np.array([bool(text) for text in why], dtype=bool)
    kept = ~out & (states != "awaited") & np.isfinite(times)
    if what == "liquid" and keys.phase_ratio is not None and keys.feed_mg_per_ml is not None:
        values, sds = keys.phase_ratio * (keys.feed_mg_per_ml - values), keys.phase_ratio * sds
    sides = np.where(states == "censored", _sides(table, what), 0.0)
    sides = -sides if what == "liquid" else sides
    order = np.flatnonzero(kept)[np.argsort(times[kept], kind="stable")]
    curve = Curve(
        name=name,
        file=table.file,
        times=times[order],
        loads=values[order],
        sds=sds[order],
        sides=sides[order],
        offered=keys.offered,
        notices=tuple(_notices(table, states, out)),
    )
    if not found.faults and len(curve.distinct) < 2:
        count = counted(len(curve.distinct), "time")
        problem = f"has readings at {count} above 0; a curve needs 2, a law 4 or more"
        found.faults.append(Fault(file=table.file, problem=problem))
    return curve


def _times(table: Table, found: Findings) -> Floats:
    times = numbers(table, "time_min", found.faults)
    for row, cell in enumerate(table.cells("time_min")):
        if not cell:
            found.faults.append(table.fault(row, "time_min", "a reading needs its time in min"))
        elif times[row] < 0:
            found.faults.append(table.fault(row, "time_min", "must be at least", number(0)))
    return times


def _sds(table: Table, found: Findings) -> Floats:
    """Return the standard uncertainties, 0 where none is given."""
    sds = numbers(table, "sd", found.faults)
    for row in np.flatnonzero(sds <= 0):
        hint = "leave it empty where it is not known"
        found.faults.append(table.fault(int(row), "sd", "must lie above", number(0), hint))
    return np.nan_to_num(sds)


def _readings(table: Table, what: str, found: Findings) -> tuple[np.ndarray, Floats]:
    states, values = [], []
    for row, cell in enumerate(table.cells(what)):
        try:
            state, value = parse_reading(cell, table.comma)
        except CellError as error:
            state, value = "awaited", np.nan
            found.faults.append(table.fault(row, what, str(error), hint=error.hint))
        states.append(state)
        values.append(value)
    return np.array(states, dtype=object), np.array(values, dtype=float)


def _sides(table: Table, what: str) -> Floats:
    return np.array([-1.0 if cell[:1] in "<≤" else 1.0 for cell in table.cells(what)])


def _notices(table: Table, states: np.ndarray, out: np.ndarray) -> list[str]:
    others = [name for name in table.columns if name not in _KNOWN]
    awaited = int(((states == "awaited") & ~out).sum())
    censored = int(((states == "censored") & ~out).sum())
    notices = [f"{table.file}: columns not used: {listed(others)}"] if others else []
    if out.any():
        notices.append(f"{table.file}: {counted(int(out.sum()), 'reading')} left out with a reason")
    if awaited:
        notices.append(f"{table.file}: {counted(awaited, 'reading')} awaited")
    if censored:
        told = "censored (< or >), used as such"
        notices.append(f"{table.file}: {counted(censored, 'reading')} {told}")
    return notices


def planned_time(keys: UptakeKeys, asked: float | None) -> float | None:
    """Return the planned contact time in min: the one asked for, else that of [uptake], or None.

    Raises StudyFaults where the one asked for is not above 0.
    """
    if asked is None:
        return keys.planned_min
    if not 0 < asked < np.inf:
        fault = Fault(
            file="--at", value=number(asked), problem="must lie above", allowed=f"{number(0)} min"
        )
        raise StudyFaults([fault])
    return asked
