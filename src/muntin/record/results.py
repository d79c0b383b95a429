"""Later results: readings joined to the wells that were run, by plate and well."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Collection, Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import NamedTuple

from muntin.record.definition import Definition
from muntin.record.faults import Fault, Findings, counted, did_you_mean, listed, nearest
from muntin.record.readings import INFORMING, Reading, joined, read_readings, response_columns
from muntin.record.tables import Table, missing_column, read_table, table_files
from muntin.record.wells import WellError, last_well, well_name

Readings = dict[str, list[Reading]]

# What `muntin reduce` writes into results/ begins with this.
REDUCED = "reduced-"


class Run(NamedTuple):
    """What was run: the row of each plate and well, the role in each row, and the plates whose
    table is at fault, so that their results cannot be judged.
    """

    wells: Mapping[tuple[str, str], int]
    roles: Sequence[str]
    unread: Collection[str]

    def plates(self) -> list[str]:
        """Names of all plates, those at fault last."""
        return [*dict.fromkeys([*(plate for plate, _ in self.wells), *self.unread])]


def join_results(
    folder: Path,
    definition: Definition,
    run: Run,
    readings: Readings,
    found: Findings,
    passed: str = "",
) -> Readings:
    """Return the readings completed by all tables in results/; each list has a row a well.

    Tables whose names begin with `passed` are passed over.
    """
    for stem, path in table_files(folder / "results", found):
        if passed and stem.startswith(passed):
            continue
        file = f"results/{path.name}"
        known = ["plate", "well", *response_columns(definition.responses)]
        table = read_table(path, file, known, found)
        if table is not None and _has_columns(table, definition, known, found):
            rows = _rows(table, definition.plate, run, found)
            _idle_notice(table, definition, rows, run, found)
            readings = _joined(table, definition, rows, readings, found)
    return readings


def _has_columns(
    table: Table, definition: Definition, known: Sequence[str], found: Findings
) -> bool:
    names = [response.name for response in definition.responses]
    header = f"expected header: plate,well{' and any of ' if names[1:] else ','}{','.join(names)}"
    faults = [
        missing_column(table, name) for name in ("plate", "well") if name not in table.columns
    ]
    others = [name for name in table.columns if name not in known]
    if others and not faults:
        found.notices.append(f"{table.file}: columns not used: {', '.join(others)}")
    if not any(name in table.columns for name in names):
        pairs = [(other, nearest(other, names)) for other in others]
        hints = [f"is its column {other} meant to be {name}?" for other, name in pairs if name]
        problem = "has no column of a response"
        faults.append(Fault(file=table.file, problem=problem, hint="".join(hints[:1])))
    for fault in faults:
        hint = "; ".join(part for part in (fault.hint, header) if part)
        found.faults.append(replace(fault, hint=hint))
    return not faults


def _rows(table: Table, size: int, run: Run, found: Findings) -> list[int | None]:
    rows: list[int | None] = []
    first: dict[tuple[str, str], str] = {}
    plates = _plates(table, run, found)
    for row, cell in enumerate(table.cells("well")):
        plate = plates[table.cells("plate")[row]]
        well = None if plate is None else _well(table, row, plate, cell, size, run, found)
        if plate is None or well is None:
            rows.append(None)
            continue
        rows.append(run.wells[plate, well])
        if (plate, well) in first:
            problem = f"of {plate} is already in {first[plate, well]}"
            found.faults.append(table.fault(row, "well", problem))
        first.setdefault((plate, well), table.where[row])
    return rows


def _plates(table: Table, run: Run, found: Findings) -> dict[str, str | None]:
    """The plate that each cell names, None where there is no such plate or its table is at fault;
    one fault a cell that names none, with the number of its rows.
    """
    cells, meant = table.cells("plate"), {}
    for cell, count in Counter(cells).items():
        meant[cell], problem, hint = _plate(cell, run)
        if problem:
            told = "; ".join(filter(None, (f"in {count} rows" if count > 1 else "", hint)))
            found.faults.append(table.fault(cells.index(cell), "plate", problem, hint=told))
    return meant


def _plate(cell: str, run: Run) -> tuple[str | None, str, str]:
    """The plate that a cell names, or the problem with it and how to mend it."""
    plates = run.plates()
    same = [name for name in plates if name.casefold() == cell.casefold()]
    same = same or [name for name in plates if _names(cell, name)]
    if len(same) == 1:
        return (None if same[0] in run.unread else same[0]), "", ""
    if same:
        return None, f"may be {' or '.join(same)}", "write the plate's whole name"
    hint = did_you_mean(cell, plates) if cell and plates else ""
    return None, "is not a plate that was run", hint


def _names(cell: str, plate: str) -> bool:
    """Whether 1, 01, plate 1 or plate_1 may stand for plate-01: same number, same word or none."""
    given, full = _word_and_number(cell), _word_and_number(plate)
    return (
        given is not None
        and full is not None
        and given[1] == full[1]
        and given[0] in ("", "plate", full[0])
    )


def _word_and_number(name: str) -> tuple[str, int] | None:
    found = re.fullmatch(r"(.*?)[\s_.-]*([0-9]+)", name.casefold())
    return None if found is None else (re.sub(r"[\s_.-]+", " ", found[1]), int(found[2]))


def _well(
    table: Table, row: int, plate: str, cell: str, size: int, run: Run, found: Findings
) -> str | None:
    try:
        well = well_name(cell, size)
    except WellError as error:
        hint = f"A1 to {last_well(size)}"
        found.faults.append(table.fault(row, "well", str(error), hint=hint))
        return None
    if (plate, well) not in run.wells:
        found.faults.append(table.fault(row, "well", f"was not run on {plate}"))
        return None
    return well


def _idle_notice(
    table: Table, definition: Definition, rows: Sequence[int | None], run: Run, found: Findings
) -> None:
    """Notice results of wells that inform nothing, such as blanks."""
    place = {row: f"{plate} {well}" for (plate, well), row in run.wells.items()}
    cells = [table.cells(response.name) for response in definition.responses]
    idle = [
        f"{place[row]} {run.roles[row]}"
        for index, row in enumerate(rows)
        if row is not None
        and run.roles[row] not in INFORMING
        and any(column[index] for column in cells)
    ]
    if idle:
        found.notices.append(
            f"{table.file}: {counted(len(idle), 'well')} whose role informs nothing "
            f"({listed(idle)}); kept on record, not used"
        )


def _joined(
    table: Table,
    definition: Definition,
    rows: list[int | None],
    readings: Readings,
    found: Findings,
) -> Readings:
    merged = dict(readings)
    for response in definition.responses:
        name = response.name
        if not any(column in table.columns for column in response_columns([response])):
            continue
        complete = list(readings[name])
        for row, new in zip(rows, read_readings(table, response, found.faults), strict=True):
            if row is not None:
                complete[row] = joined(complete[row], new, name, found.faults)
        merged[name] = complete
    return merged
