"""The table of all wells, and what must hold over it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from muntin.record.definition import STUDY_FILE, Definition
from muntin.record.faults import Fault, counted, did_you_mean, nearest, quoted
from muntin.record.plates import PlateRows
from muntin.record.readings import INFORMING, USED, Reading, reading_faults
from muntin.record.tables import Table, missing_column


def wells_table(
    definition: Definition,
    rows: Sequence[PlateRows],
    readings: Mapping[str, Sequence[Reading]],
    excluding: bool = True,
) -> pd.DataFrame:
    """Return one row a well of every plate; columns as in Study.wells.

    Without `excluding` readings that were left out come back, their reasons beside them.
    """
    roles, excluded = _stacked(rows, "role"), _stacked(rows, "exclude")
    data: dict[str, Any] = {name: _stacked(rows, name) for name in ("plate", "well", "role")}
    for name in definition.factor_names:
        columns = (name, f"{name}_target", f"{name}_measured")
        data |= {column: _stacked(rows, column) for column in columns}
    for name, given in readings.items():
        states = [
            state_of(reading, role, why, excluding)
            for reading, role, why in zip(given, roles, excluded, strict=True)
        ]
        read = np.array([state in USED for state in states], dtype=bool)
        data[name] = np.where(read, [reading.value for reading in given], np.nan)
        data[f"{name}_sd"] = np.where(read, [reading.sd for reading in given], np.nan)
        data[f"{name}_state"] = states
        data[f"{name}_side"] = np.where(read, [reading.side for reading in given], 0)
        data[f"{name}_exclude"] = [reading.reason for reading in given]
    data["exclude"] = excluded
    shared = [name for error in definition.shared_errors for name in error.by]
    others = [*shared, *(name for part in rows for name in part.others)]
    data |= {name: _stacked(rows, name) for name in others if name not in data}
    return _typed(pd.DataFrame(data), definition)


def as_read(definition: Definition, wells: pd.DataFrame) -> pd.DataFrame:
    """Return the wells (`Study.wells`) as a table to write: plate, well, role; each factor at the
    value that the model uses, and its _target; each response with its _sd and _state; exclude.
    """
    factors = [f"{name}{end}" for name in definition.factor_names for end in ("", "_target")]
    responses = [f"{r.name}{end}" for r in definition.responses for end in ("", "_sd", "_state")]
    return wells[["plate", "well", "role", *factors, *responses, "exclude"]]


def _stacked(rows: Sequence[PlateRows], name: str) -> list[Any]:
    cells: list[Any] = []
    for part in rows:
        cells += list(part.columns.get(name, [""] * len(part.columns["well"])))
    return cells


def _typed(frame: pd.DataFrame, definition: Definition) -> pd.DataFrame:
    ranged = [factor.name for factor in definition.factors if factor.continuous]
    numbers = [column for name in ranged for column in (name, f"{name}_target")]
    numbers += [f"{r.name}{end}" for r in definition.responses for end in ("", "_sd")]
    types = {str(name): "float64" if name in numbers else "object" for name in frame.columns}
    types |= {f"{name}_measured": "bool" for name in definition.factor_names}
    types |= {f"{r.name}_side": "int64" for r in definition.responses}
    return frame.astype(types)


def state_of(reading: Reading, role: str, excluded: str, excluding: bool = True) -> str:
    """Return "read", "awaited", "censored", "excluded" if `excluding`, or "none" for a control not
    read.
    """
    if role not in INFORMING and not reading.text:
        return "none"
    left_out = excluding and bool(excluded or reading.reason)
    return "excluded" if left_out else reading.state


def late_faults(
    definition: Definition, frame: pd.DataFrame, readings: Mapping[str, Sequence[Reading]]
) -> Iterator[Fault]:
    """Yield readings that cannot be, once plates and results are joined."""
    for response in definition.responses:
        states = frame[f"{response.name}_state"]
        given = zip(readings[response.name], states, strict=True)
        yield from reading_faults(response, [one for one, state in given if state in USED])


def no_reading_fault(definition: Definition, counting: pd.DataFrame) -> Fault | None:
    """Return the fault of a study whose wells were run, but none of them read.

    `counting` are the informing wells of plates that count; without any, nothing has been run.
    """
    names = [response.name for response in definition.responses]
    if counting.empty or any(counting[f"{name}_state"].isin(USED).any() for name in names):
        return None
    plates = counting["plate"].nunique()
    reads = definition.assay is not None
    reduce = "run muntin reduce DIR READS, " if reads else ""
    return Fault(
        file="plates",
        problem=f"hold no reading of any response in {counted(len(counting), 'well')} "
        f"on {counted(plates, 'plate')}",
        hint=f"{reduce}fill in {', '.join(names)}, or keep a table in plans/ until it was run",
    )


def shared_column_faults(
    definition: Definition, tables: Mapping[str, Table | None], needed: Mapping[str, Sequence[int]]
) -> Iterator[Fault]:
    """Yield shared errors that name no column, and tables or wells that lack one.

    `needed` gives for each plate that counts the rows whose wells inform the model.
    """
    names = ["plate", *definition.factor_names]
    given = {plate: table for plate, table in tables.items() if table is not None and len(table)}
    for index, shared in enumerate(definition.shared_errors, start=1):
        for name in shared.by:
            if name in names:
                continue
            if not any(name in table.columns for table in given.values()):
                if given or nearest(name, names, cutoff=0.8):
                    yield _unknown_column(index, name, names, given)
                continue
            for plate, rows in needed.items():
                yield from _cell_faults(given.get(plate), name, index, rows)


def _unknown_column(
    index: int, name: str, names: Sequence[str], given: Mapping[str, Table]
) -> Fault:
    columns = {column: None for table in given.values() for column in table.columns}
    return Fault(
        file=STUDY_FILE,
        where=f"shared_errors {index}, by",
        value=quoted(name),
        problem="is neither plate, a factor nor a column of the plate tables",
        hint=did_you_mean(name, list(dict.fromkeys([*names, *columns]))),
    )


def _cell_faults(
    table: Table | None, name: str, index: int, rows: Sequence[int]
) -> Iterator[Fault]:
    if table is None or not rows:
        return
    rule = f"study.toml, shared_errors {index}, names it"
    if name not in table.columns:
        yield missing_column(table, name, rule)
        return
    for row in rows:
        if not table.cells(name)[row]:
            yield table.fault(row, name, "the well needs it", hint=rule)
