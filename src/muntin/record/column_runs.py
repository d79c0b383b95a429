"""Column runs that were made: columns/column-01.csv and so on, never pooled with wells."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import NamedTuple

from muntin.record.cells import CellError, parse_number, reasons
from muntin.record.column_plan import COLUMNS, PLAN, ColumnPlan, PlannedRun, read_plans
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import Fault, Findings, StudyFaults, listed, nearest
from muntin.record.readings import (
    USED,
    Reading,
    read_readings,
    reading_faults,
    response_columns,
)
from muntin.record.tables import Table, missing_column, read_table, table_files


class ColumnRun(NamedTuple):
    """One run that was made: number, reason to leave it out ("" where it counts), its readings by
    response, and its address.
    """

    run: int
    excluded: str
    readings: Mapping[str, Reading]
    file: str
    where: str

    def used(self, name: str) -> Reading | None:
        """The reading of a response where it counts and was read, also where censored."""
        reading = self.readings[name]
        whole = not self.excluded and not reading.reason
        return reading if whole and reading.state in USED else None


class OnRecord(NamedTuple):
    """All that columns/ holds: plans, oldest first, runs that were made, and notices."""

    plans: list[ColumnPlan]
    made: list[ColumnRun]
    notices: list[str]


def read_columns(folder: Path, definition: Definition) -> OnRecord:
    """Return what columns/ of a study holds. Raises StudyFaults with every fault in it."""
    found = Findings()
    plans = read_plans(folder, definition, found)
    runs = {run.run: run for plan in plans for run in plan.runs}
    made = read_runs(folder, definition, runs, found)
    if found.faults:
        raise StudyFaults(found.faults)
    return OnRecord(plans, made, found.notices)


def read_runs(
    folder: Path, definition: Definition, planned: Mapping[int, PlannedRun], found: Findings
) -> list[ColumnRun]:
    """Return the runs in all tables of columns/ but those of plans; each fault joins `found`."""
    runs: list[ColumnRun] = []
    first: dict[int, str] = {}
    passed = Findings(faults=found.faults)
    for stem, path in table_files(folder / COLUMNS, passed):
        if stem == PLAN or stem.startswith(f"{PLAN}.r"):
            continue
        file = f"{COLUMNS}/{path.name}"
        table = read_table(path, file, run_columns(definition), found)
        if table is not None and _sound(table, definition, planned, found):
            runs += _runs(table, definition, planned, first, found)
    found.notices.extend(n for n in passed.notices if ".toml" not in n)
    return sorted(runs, key=lambda run: run.run)


def run_columns(definition: Definition) -> list[str]:
    """Return all column names that a table of column runs may use."""
    own = ["run", "place", "protein_mg", *definition.factor_names]
    return [*own, *response_columns(definition.responses), "exclude"]


def _sound(
    table: Table, definition: Definition, planned: Mapping[int, PlannedRun], found: Findings
) -> bool:
    if not planned:
        problem = "nothing was predicted before this run"
        hint = "move it out of columns/, then plan with muntin confirm"
        found.faults.append(Fault(file=table.file, problem=problem, hint=hint))
        return False
    known, names = run_columns(definition), [r.name for r in definition.responses]
    if "run" not in table.columns:
        hint = "the number of the planned run; copy columns/plan.csv and fill it in"
        found.faults.append(missing_column(table, "run", hint))
        return False
    others = [name for name in table.columns if name not in known]
    if not any(name in table.columns for name in names):
        pairs = [(other, nearest(other, names)) for other in others]
        hints = [f"is its column {other} meant to be {name}?" for other, name in pairs if name]
        hint = hints[0] if hints else f"expected any of {listed(names)}"
        problem = "has no column of a response"
        found.faults.append(Fault(file=table.file, problem=problem, hint=hint))
        return False
    if others:
        found.notices.append(f"{table.file}: columns not used: {listed(others)}")
    return True


def _runs(
    table: Table,
    definition: Definition,
    planned: Mapping[int, PlannedRun],
    first: dict[int, str],
    found: Findings,
) -> Iterator[ColumnRun]:
    excluded = reasons(table, "exclude", found.faults)
    every = {r.name: read_readings(table, r, found.faults) for r in definition.responses}
    for response in definition.responses:
        found.faults.extend(reading_faults(response, _read(every[response.name], excluded)))
    for row in range(len(table)):
        number = _number(table, row, planned, first, found)
        if number is None:
            continue
        for factor in definition.factors:
            _check_setting(table, row, factor, planned[number], found)
        readings = {name: readings[row] for name, readings in every.items()}
        yield ColumnRun(number, excluded[row], readings, table.file, table.where[row])


def _read(readings: Sequence[Reading], excluded: Sequence[str]) -> list[Reading]:
    """The readings that are used."""
    pairs = zip(readings, excluded, strict=True)
    return [one for one, why in pairs if one.state in USED and not (why or one.reason)]


def _number(
    table: Table,
    row: int,
    planned: Mapping[int, PlannedRun],
    first: dict[int, str],
    found: Findings,
) -> int | None:
    cell = table.cells("run")[row]
    number = int(cell) if cell.isascii() and cell.isdigit() and len(cell) < 7 else 0
    if number not in planned:
        problem = "is not a planned run" if cell else "every row needs its run"
        hint = f"planned: {listed(map(str, planned))}"
        found.faults.append(table.fault(row, "run", problem, hint=hint))
        return None
    if number in first:
        found.faults.append(table.fault(row, "run", f"is already in {first[number]}"))
        return None
    first[number] = f"{table.file}, {table.where[row]}"
    return number


def _check_setting(
    table: Table, row: int, factor: Factor, run: PlannedRun, found: Findings
) -> None:
    """A run at another condition than planned was not predicted."""
    cell, asked = table.cells(factor.name)[row], run.condition[factor.name]
    if not cell:
        return
    try:
        value = parse_number(cell, table.comma) if factor.continuous else cell
    except CellError as error:
        found.faults.append(table.fault(row, factor.name, str(error), hint=error.hint))
        return
    if isinstance(value, float) and isinstance(asked, float | int):
        same = abs(value - asked) <= 0.5 * factor.span[2] * (1 + 1e-9)
    else:
        same = str(value).casefold() == str(asked).casefold()
    if not same:
        shown = f"{factor.shown(asked)} {factor.unit}".rstrip()
        problem = f"is not what run {run.run} was predicted for, which is"
        hint = "give a reason under exclude, or plan again with muntin confirm --again"
        if not table.cells("exclude")[row]:
            found.faults.append(table.fault(row, factor.name, problem, shown, hint))
