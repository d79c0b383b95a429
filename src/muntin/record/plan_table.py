"""A plan that the user edited: its rows, and every fault that keeps them from being run."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from muntin.record.cells import reasons
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import Fault, Findings, listed
from muntin.record.keys import Truths
from muntin.record.levels import check_stocks, read_choices, read_levels, read_targets
from muntin.record.plan_faults import condition_faults, level_faults, line_faults, step_faults
from muntin.record.plates import plate_columns, read_roles
from muntin.record.readings import INFORMING, USED, response_columns
from muntin.record.stock_levels import stock_levels
from muntin.record.stocks import Stock
from muntin.record.study import Study
from muntin.record.tables import Table, missing_column, read_table
from muntin.record.wells import WellError, last_well, well_name

_REVISION = re.compile(r"\.r[0-9]+$")
_REPEAT = re.compile(r"^well ([0-9]{1,4}) of this condition")
_OWN = ("well", "role", "plate", "exclude", "p_now", "reason")


@dataclass(frozen=True, kw_only=True, eq=False)
class KeptPlan:
    """Rows of a plan that are to stay.

    file: as shown in messages. rows: well ("" where it is to be found), role, the factors (targets
    in raw units, empty for controls), each factor's _measured (NaN where nothing was measured) and
    reason. left_out: rows with a reason in exclude, the same columns and that reason. cells: the
    user's own columns of `rows`, and measured values that stand in the table, as text.
    """

    file: str
    path: Path
    rows: pd.DataFrame
    left_out: pd.DataFrame
    cells: pd.DataFrame

    def held(self) -> pd.DataFrame:
        """The rows that inform the model, in the order in which they were chosen as far as their
        reasons tell; the index is that of `rows`.
        """
        rows = self.rows[self.rows["role"].isin(INFORMING)]
        number = rows["reason"].str.extract(_REPEAT, expand=False).fillna("1").astype(int)
        return rows.loc[number.sort_values(kind="stable").index]

    def count(self, role: str) -> int:
        """How many rows have a role."""
        return int((self.rows["role"] == role).sum())


def read_plan(
    path: Path, study: Study, plate: str, stocks: Sequence[Stock], found: Findings
) -> KeptPlan | None:
    """Return the rows of an edited plan of `plate`, or None where it cannot be read at all.

    Every fault joins `found`, each with row, column, value, and what is allowed.
    """
    definition = study.definition
    file = _shown(path, study.folder)
    if not path.is_file():
        problem = "is a folder, not a plan" if path.is_dir() else "there is no such file"
        found.faults.append(Fault(file=path.name if path.is_dir() else file, problem=problem))
        return None
    table = read_table(path, file, plate_columns(definition), found)
    if table is None:
        return None
    _check_plate(path, file, study, plate, found)
    table = _with_wells(table, definition, found)
    # What stocks measured is told with the plan, not row by row.
    return _rows(path, table, study, stocks, Findings(faults=found.faults))


def _shown(path: Path, folder: Path) -> str:
    """The path inside the study where it lies there, else as given."""
    try:
        return path.resolve().relative_to(folder.resolve()).as_posix()
    except ValueError:
        return str(path)


def _check_plate(path: Path, file: str, study: Study, plate: str, found: Findings) -> None:
    """A file of the name of a plate that was run is no plan of the next one."""
    name = _REVISION.sub("", path.stem)
    if name in set(study.wells["plate"]):
        problem = f"is of {name}, which was run; the next plate is"
        hint = f"copy it to plans/{plate}.csv and edit it there"
        found.faults.append(Fault(file=file, problem=problem, allowed=plate, hint=hint))


def _with_wells(table: Table, definition: Definition, found: Findings) -> Table:
    """The table with plain well names, each free and used once but for rows left out."""
    free, first = set(definition.free_wells), dict[str, str]()
    wells = []
    for row, (cell, out) in enumerate(
        zip(table.cells("well"), table.cells("exclude"), strict=True)
    ):
        well = _well(table, row, cell, definition, found) if cell else ""
        if well and not out:
            if well in first:
                found.faults.append(table.fault(row, "well", f"is already in {first[well]}"))
            elif well not in free:
                allowed = definition.plan.free_wells or ""
                problem = "is not free; free are"
                fault = table.fault(row, "well", problem, allowed, "study.toml, plan, free_wells")
                found.faults.append(fault)
            first.setdefault(well, table.where[row])
        wells.append(well)
    where = [
        f"{row}, well {well}" if well else row for row, well in zip(table.where, wells, strict=True)
    ]
    return replace(table, columns={**table.columns, "well": wells}, where=where)


def _well(table: Table, row: int, cell: str, definition: Definition, found: Findings) -> str:
    try:
        return well_name(cell, definition.plate)
    except WellError as error:
        hint = f"A1 to {last_well(definition.plate)}, or empty to have one found"
        found.faults.append(table.fault(row, "well", str(error), hint=hint))
        return ""


def _rows(
    path: Path,
    table: Table,
    study: Study,
    stocks: Sequence[Stock],
    found: Findings,
) -> KeptPlan:
    definition = study.definition
    roles = read_roles(table, found)
    out = reasons(table, "exclude", found.faults)
    needed = np.array([r in INFORMING and not o for r, o in zip(roles, out, strict=True)], bool)
    columns: dict[str, Any] = {"well": table.cells("well"), "role": roles}
    targets = {f.name: _targets(table, f, needed, found) for f in definition.factors}
    of_stocks = stock_levels(definition, pd.DataFrame(targets), stocks)
    for i, factor in enumerate(definition.factors):
        name, measured = factor.name, f"{factor.name}_measured"
        columns |= {name: targets[name], measured: np.full(len(table), np.nan)}
        if factor.continuous:
            check_stocks(factor, stocks, found)
        if factor.continuous and name in table.columns:
            at, told = targets[name], of_stocks.of(i)
            used, known = read_levels(table, factor, needed, at, told, found)
            columns[name] = step_faults(table, factor, at, needed, found)
            columns[measured] = np.where(known | np.isfinite(told[0]), used, np.nan)
    columns["reason"] = table.cells("reason")
    frame = pd.DataFrame(columns, index=range(len(table)))
    controls = ~frame["role"].isin(INFORMING)
    for factor in definition.factors:
        frame.loc[controls, factor.name] = np.nan if factor.continuous else None
    own = {name: table.cells(name) for name in table.columns if name not in _known(definition)}
    cells = pd.DataFrame(own, index=frame.index)
    _check_rows(table, study, frame, needed, found)
    excluded = np.array([bool(o) for o in out], dtype=bool)
    left_out = frame.assign(exclude=out)[excluded].reset_index(drop=True)
    rows = frame[~excluded].reset_index(drop=True)
    cells = cells[~excluded].reset_index(drop=True)
    return KeptPlan(file=table.file, path=path, rows=rows, left_out=left_out, cells=cells)


def _targets(table: Table, factor: Factor, needed: Truths, found: Findings) -> Any:
    """The levels of a factor that a plan asks for, one a row."""
    if factor.name not in table.columns:
        found.faults.append(missing_column(table, factor.name))
        return np.full(len(table), np.nan)
    if not factor.continuous:
        return [choice or None for choice in read_choices(table, factor, needed, found)]
    return read_targets(table, factor, needed, found)


def _known(definition: Definition) -> set[str]:
    return {*_OWN, *definition.factor_names, *response_columns(definition.responses)}


def _check_rows(
    table: Table, study: Study, frame: pd.DataFrame, needed: Truths, found: Findings
) -> None:
    """What the rows break together, or as whole conditions."""
    definition = study.definition
    for response in definition.responses:
        for row, cell in enumerate(table.cells(response.name)):
            if cell:
                problem = "is a reading; a plate that was run belongs in plates/"
                found.faults.append(table.fault(row, response.name, problem))
    names = list(definition.factor_names)
    whole = needed & frame[names].notna().all(axis=1).to_numpy()
    found.faults.extend(condition_faults(table, definition, frame, whole))
    found.faults.extend(level_faults(table, definition, frame, whole))
    found.faults.extend(line_faults(table, definition, frame, whole))
    found.faults.extend(_bridge_faults(table, study, frame, whole))


def _bridge_faults(table: Table, study: Study, frame: pd.DataFrame, whole: Truths) -> list[Fault]:
    """Bridging wells that repeat no condition with a reading."""
    definition, names = study.definition, list(study.definition.factor_names)
    wells = study.informing()
    states = wells[[f"{r.name}_state" for r in definition.responses]]
    read = wells[states.isin(USED).any(axis=1)]
    ran = {tuple(row) for row in read[[f"{n}_target" for n in names]].itertuples(index=False)}
    faults = []
    for row in np.flatnonzero(whole & (frame["role"] == "bridge").to_numpy()):
        values = tuple(frame.loc[row, names])
        if values not in ran:
            shown = [
                f"{f.name} {f.shown(v)}" for f, v in zip(definition.factors, values, strict=True)
            ]
            problem = f"is a bridging well, but no well read so far has {listed(shown)};"
            hint = "take a condition that was run" if ran else "nothing was read yet"
            faults.append(table.fault(int(row), "role", problem, "call it test or reference", hint))
    return faults
