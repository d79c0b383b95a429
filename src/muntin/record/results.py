"""Later results: readings joined to the wells that were run, by plate and well."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from pathlib import Path

from muntin.record.definition import Definition
from muntin.record.faults import Fault, Findings, did_you_mean, nearest
from muntin.record.readings import Reading, joined, read_readings, response_columns
from muntin.record.tables import Table, missing_column, read_table, table_files
from muntin.record.wells import WellError, last_well, well_name

Readings = dict[str, list[Reading]]
Wells = Mapping[tuple[str, str], int]


def join_results(
    folder: Path,
    definition: Definition,
    wells: Wells,
    unread: Collection[str],
    readings: Readings,
    found: Findings,
) -> Readings:
    """Return the readings completed by all tables in results/.

    `wells` maps plate and well to the row in each list of `readings`; `unread` are plates whose
    table is at fault, so that their results cannot be judged.
    """
    for _, path in table_files(folder / "results", found):
        file = f"results/{path.name}"
        known = ["plate", "well", *response_columns(definition.responses)]
        table = read_table(path, file, known, found)
        if table is None:
            continue
        lacking = [name for name in ("plate", "well") if name not in table.columns]
        found.faults.extend(missing_column(table, name) for name in lacking)
        if not lacking and _has_responses(table, definition, known, found):
            rows = _rows(table, definition.plate, wells, unread, found)
            readings = _joined(table, definition, rows, readings, found)
    return readings


def _has_responses(
    table: Table, definition: Definition, known: Sequence[str], found: Findings
) -> bool:
    others = [name for name in table.columns if name not in known]
    if others:
        found.notices.append(f"{table.file}: columns not used: {', '.join(others)}")
    names = [response.name for response in definition.responses]
    if any(name in table.columns for name in names):
        return True
    pairs = [(other, nearest(other, names)) for other in others]
    hint = next((f"is its column {other} meant to be {name}?" for other, name in pairs if name), "")
    hint = hint or "known: " + ", ".join(names)
    fault = Fault(file=table.file, problem="has no column of a response", hint=hint)
    found.faults.append(fault)
    return False


def _rows(
    table: Table, size: int, wells: Wells, unread: Collection[str], found: Findings
) -> list[int | None]:
    rows: list[int | None] = []
    first: dict[tuple[str, str], str] = {}
    names = {plate.casefold(): plate for plate, _ in wells}
    for row, (plate, cell) in enumerate(
        zip(table.cells("plate"), table.cells("well"), strict=True)
    ):
        plate = names.get(plate.casefold(), plate)
        well = None if plate in unread else _well(table, row, plate, cell, size, wells, found)
        rows.append(None if well is None else wells[plate, well])
        if well is not None and (plate, well) in first:
            problem = f"of {plate} is already in {first[plate, well]}"
            found.faults.append(table.fault(row, "well", problem))
        if well is not None:
            first.setdefault((plate, well), table.where[row])
    return rows


def _well(
    table: Table, row: int, plate: str, cell: str, size: int, wells: Wells, found: Findings
) -> str | None:
    plates = list(dict.fromkeys(name for name, _ in wells))
    if plate not in plates:
        hint = did_you_mean(plate, plates) if plate and plates else ""
        fault = table.fault(row, "plate", "is not a plate that was run", hint=hint)
        found.faults.append(fault)
        return None
    try:
        well = well_name(cell, size)
    except WellError as error:
        hint = f"A1 to {last_well(size)}"
        found.faults.append(table.fault(row, "well", str(error), hint=hint))
        return None
    if (plate, well) not in wells:
        found.faults.append(table.fault(row, "well", f"was not run on {plate}"))
        return None
    return well


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
