"""Plate tables: what was run and measured, one row a well."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from muntin.record.cells import reasons
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import Fault, Findings, counted, did_you_mean, listed, nearest, quoted
from muntin.record.keys import Truths
from muntin.record.levels import check_stocks, read_choices, read_levels, read_targets
from muntin.record.readings import INFORMING, Reading, read_readings, response_columns
from muntin.record.stock_levels import stock_levels
from muntin.record.stocks import Stock
from muntin.record.tables import Table, missing_column, read_table
from muntin.record.unused_stocks import unused_stocks
from muntin.record.wells import WellError, last_well, well_name

ROLES = (*INFORMING, "blank", "load", "no_resin", "water")
_FIXED = ("well", "role", "exclude", "plate")
_PLAN = ("p_now", "reason")


@dataclass(frozen=True, slots=True)
class PlateRows:
    """The wells of one plate, read.

    `columns` are those of the wells table, `readings` the readings by response, `others` the
    columns that passed through, `needed` the rows whose wells inform the model.
    """

    columns: dict[str, Any]
    readings: dict[str, list[Reading]]
    others: tuple[str, ...]
    needed: tuple[int, ...]


def plate_columns(definition: Definition) -> list[str]:
    """Return all column names that a plate table of this study may use."""
    names = [*_FIXED, *_PLAN]
    for factor in definition.factors:
        names += [factor.name, f"{factor.name}_measured"]
    return names + response_columns(definition.responses)


def open_plate(
    path: Path, file: str, definition: Definition | None, found: Findings
) -> Table | None:
    """Return a plate table with sound, plain well names, or None; faults join `found`.

    A table without a row below its headings has no columns but `well`, so none can be wrong.
    """
    known = list(_FIXED) if definition is None else plate_columns(definition)
    table = read_table(path, file, known, found)
    if table is None:
        return None
    if "well" not in table.columns and (len(table) or table.sheets[1:]):
        found.faults.append(missing_column(table, "well"))
        return None
    if not len(table):
        return replace(table, columns={"well": []})
    plate = 384 if definition is None else definition.plate
    return _with_wells(table, plate, path.stem, found)


def _with_wells(table: Table, plate: int, name: str, found: Findings) -> Table:
    wells, first = [], dict[str, str]()
    for row, cell in enumerate(table.columns["well"]):
        well = _well(table, row, cell, plate, found)
        if well and well in first:
            problem = f"is already in {first[well]}"
            found.faults.append(table.fault(row, "well", problem))
        first.setdefault(well, table.where[row])
        wells.append(well)
    for row, cell in enumerate(table.cells("plate")):
        if cell and cell != name:
            found.faults.append(table.fault(row, "plate", f"is not {name}, the name of the file"))
    where = [
        f"{row}, well {well}" if well else row for row, well in zip(table.where, wells, strict=True)
    ]
    return replace(table, columns={**table.columns, "well": wells}, where=where)


def _well(table: Table, row: int, cell: str, plate: int, found: Findings) -> str:
    try:
        if cell:
            return well_name(cell, plate)
        found.faults.append(table.fault(row, "well", "every row needs its well"))
    except WellError as error:
        hint = f"A1 to {last_well(plate)}"
        found.faults.append(table.fault(row, "well", str(error), hint=hint))
    return ""


def read_plate(
    name: str, table: Table, definition: Definition, stocks: Sequence[Stock], found: Findings
) -> PlateRows:
    """Return the wells of one plate; `stocks` are those measured for it."""
    roles = read_roles(table, found)
    excluded = reasons(table, "exclude", found.faults)
    needed = np.array(
        [role in INFORMING and not why for role, why in zip(roles, excluded, strict=True)], bool
    )
    columns: dict[str, Any] = {
        "plate": [name] * len(table),
        "well": table.cells("well"),
        "role": roles,
        "exclude": excluded,
    }
    targets = {f.name: _targets(table, f, needed, found) for f in definition.factors}
    of_stocks = stock_levels(definition, pd.DataFrame(targets), stocks)
    found.notices.extend(unused_stocks(definition, stocks, of_stocks, name))
    for i, factor in enumerate(definition.factors):
        target = targets[factor.name]
        values, known = target, np.zeros(len(table), dtype=bool)
        if factor.continuous:
            check_stocks(factor, stocks, found)
        if factor.continuous and factor.name in table.columns:
            told = of_stocks.of(i)
            values, known = read_levels(table, factor, needed, np.array(target), told, found)
        columns |= {
            factor.name: values,
            f"{factor.name}_target": target,
            f"{factor.name}_measured": known,
        }
    readings = {
        response.name: read_readings(table, response, found.faults)
        for response in definition.responses
    }
    others = _others(table, definition, found)
    columns |= {other: table.cells(other) for other in others}
    return PlateRows(columns, readings, others, tuple(np.flatnonzero(needed).tolist()))


def read_roles(table: Table, found: Findings) -> list[str]:
    """Return the role of each row of a table, `test` where none is given."""
    roles = []
    for row, cell in enumerate(table.cells("role")):
        role = cell.lower().replace(" ", "_").replace("-", "_") or "test"
        if role not in ROLES:
            hint = did_you_mean(cell, ROLES)
            found.faults.append(table.fault(row, "role", "is not a role", hint=hint))
        roles.append(role)
    return roles


def _targets(table: Table, factor: Factor, needed: Truths, found: Findings) -> Any:
    """The levels to which the wells were set, one a row."""
    if factor.name not in table.columns:
        return _earlier(table, factor, needed, found)
    if not factor.continuous:
        return read_choices(table, factor, needed, found)
    return read_targets(table, factor, needed, found)


def _earlier(table: Table, factor: Factor, needed: Truths, found: Findings) -> list[Any]:
    if not len(table):
        return []
    empty = np.nan if factor.continuous else ""
    if factor.earlier_value is None:
        hint = "a factor that was added later needs earlier_value in study.toml"
        found.faults.append(missing_column(table, factor.name, hint))
        return [empty] * len(table)
    found.notices.append(
        f"{table.file} has no column {factor.name}; its earlier_value, "
        f"{quoted(factor.earlier_value)}, stands for it"
    )
    return [factor.earlier_value if need else empty for need in needed]


def _others(table: Table, definition: Definition, found: Findings) -> tuple[str, ...]:
    """Return the columns that pass through; odd ones are faults or notices."""
    known = plate_columns(definition)
    taken = {f"{factor.name}_target".casefold() for factor in definition.factors}
    ends = ("_state", "_side")
    taken |= {f"{r.name}{end}".casefold() for r in definition.responses for end in ends}
    others = []
    for name in table.columns:
        if name.casefold() in taken:
            problem = "is a name that muntin keeps for itself; rename the column"
            found.faults.append(Fault(file=table.file, column=name, problem=problem))
        elif name not in known:
            others.append(name)
    _check_resemblance(table, definition, others, found)
    return tuple(others)


def _check_resemblance(
    table: Table, definition: Definition, others: Sequence[str], found: Findings
) -> None:
    columns = (name for name in plate_columns(definition) if name not in (*_PLAN, "plate"))
    lacking = [name for name in columns if name not in table.columns]
    weighty = [response.name for response in definition.responses]
    weighty += [factor.name for factor in definition.factors if factor.earlier_value is not None]
    for name in others:
        close = nearest(name, lacking, cutoff=0.8)
        if close in weighty:
            problem = f"resembles {close}, which this table lacks"
            hint = "rename one of them"
            found.faults.append(Fault(file=table.file, column=name, problem=problem, hint=hint))
        elif close is not None and close not in definition.factor_names:
            found.notices.append(
                f"{table.file}: column {name} is not used; is it meant as {close}?"
            )


def outside_limits(name: str, definition: Definition, rows: PlateRows) -> list[str]:
    """Return a notice of the wells of a plate that were run outside the limits of the study."""
    targets = {factor: rows.columns[f"{factor}_target"] for factor in definition.factor_names}
    allowed = definition.allowed(pd.DataFrame(targets))
    wells = [rows.columns["well"][row] for row in rows.needed if not allowed[row]]
    if not wells:
        return []
    return [
        f"{name}: {counted(len(wells), 'well')} outside the limits ({listed(wells)}); they are used"
    ]
