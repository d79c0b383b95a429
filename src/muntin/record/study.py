"""A study as read: its definition, its wells, and what was left out."""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import UTC, date, datetime
from pathlib import Path

import pandas as pd

from muntin.record.changes import NO_CHANGES, Changes, changes_of
from muntin.record.copies import copy_faults
from muntin.record.definition import STUDY_FILE, Definition, definition_faults, sound_part
from muntin.record.faults import Fault, Findings, StudyFaults
from muntin.record.files import write_atomic
from muntin.record.filled_plans import filled_plans
from muntin.record.ledger import read_ledger
from muntin.record.notebook import study_card, study_line
from muntin.record.notes import Plate, read_notes
from muntin.record.notices import column_notice, definition_notices, odd_notices, well_notices
from muntin.record.plates import PlateRows, open_plate, outside_limits, read_plate
from muntin.record.readings import INFORMING, USED, Reading
from muntin.record.reduced import reduced_notices
from muntin.record.results import REDUCED, Run, join_results
from muntin.record.stocks import read_stocks
from muntin.record.stop_rule import (
    STOP_FILE,
    RecordedStop,
    Standing,
    read_stops,
    standing_rule,
    stop_text,
)
from muntin.record.tables import Table, table_files
from muntin.record.toml_files import parse, read_toml
from muntin.record.wells_table import (
    late_faults,
    no_reading_fault,
    shared_column_faults,
    wells_table,
)
from muntin.record.writing import unfinished_notice


@dataclass(frozen=True, kw_only=True)
class Counts:
    """What a study holds; wells and readings are those of test, bridge and reference wells.

    `plates` counts all plates and `void` those that do not count; `wells` and what follows are of
    the others. `excluded_wells` are left out whole. `read`, `awaited`, `excluded` and `censored`
    map each response to its number of wells; for each response they add up to `wells`.
    """

    plates: int
    void: int
    wells: int
    controls: int
    excluded_wells: int
    read: dict[str, int]
    awaited: dict[str, int]
    excluded: dict[str, int]
    censored: dict[str, int]


@dataclass(frozen=True, kw_only=True, eq=False)
class Study:
    """One study, frozen; made by `open_study`.

    `wells` has a row a well of every plate, void ones too: plate, well, role; each factor (the
    value the model uses, raw unit), its _target and whether it was _measured; each response in the
    user's unit (the limit of a censored reading) with its _sd, _state, _side (-1 below the limit, 1
    above, else 0) and _exclude; exclude; then the columns that passed through. `stops` are the
    stop rules on record, oldest first; `changes` what differs from what earlier advice rested on.
    """

    folder: Path
    definition: Definition
    wells: pd.DataFrame
    plates: tuple[Plate, ...]
    notices: tuple[str, ...]
    stops: tuple[RecordedStop, ...] = ()
    changes: Changes = NO_CHANGES

    def __repr__(self) -> str:
        return study_line(self)

    def _repr_html_(self) -> str:
        return study_card(self)

    @property
    def stopping(self) -> Standing:
        """The stop rule that holds, and what is to be recorded and said of it."""
        states = [f"{response.name}_state" for response in self.definition.responses]
        read = self.informing()[states].isin(USED).any(axis=1)
        return standing_rule(self.definition.stop, self.stops, int(read.sum()))

    @property
    def void(self) -> tuple[Plate, ...]:
        """Plates that do not count."""
        return tuple(plate for plate in self.plates if plate.void)

    def informing(self) -> pd.DataFrame:
        """Return the test, bridge and reference wells of the plates that count."""
        void = [plate.name for plate in self.void]
        keep = self.wells["role"].isin(INFORMING) & ~self.wells["plate"].isin(void)
        return self.wells[keep]

    def readings(self, name: str) -> pd.DataFrame:
        """Return the readings of one response that inform the model.

        Columns: plate, well, role; the factors (raw unit), their targets, and whether a value was
        measured; the columns that shared errors name; y and sd in the natural unit (per cent of a
        fraction divided by 100), sd NaN where none is given; censored, 0 for a reading, -1 where
        it lies below y and 1 where above; row, the row in `wells`. Raises KeyError for an unknown
        response.
        """
        response = {response.name: response for response in self.definition.responses}[name]
        wells = self.informing()
        wells = wells[wells[f"{name}_state"].isin(USED)]
        factors = self.definition.factor_names
        shared = [by for error in self.definition.shared_errors for by in error.by]
        about = [f"{factor}{end}" for factor in factors for end in ("_target", "_measured")]
        columns = dict.fromkeys(["plate", "well", "role", *factors, *about, *shared])
        unit = response.unit_size
        return wells[list(columns)].assign(
            y=wells[name] / unit,
            sd=wells[f"{name}_sd"] / unit,
            censored=wells[f"{name}_side"],
            row=wells.index,
        )

    def counts(self) -> Counts:
        """Count plates, wells and readings."""
        wells = self.informing()
        void = [plate.name for plate in self.void]
        names = [response.name for response in self.definition.responses]

        def count(state: str) -> dict[str, int]:
            return {name: int((wells[f"{name}_state"] == state).sum()) for name in names}

        return Counts(
            plates=len(self.plates),
            void=len(void),
            wells=len(wells),
            controls=int((~self.wells["plate"].isin(void)).sum()) - len(wells),
            excluded_wells=int((wells["exclude"] != "").sum()),
            read=count("read"),
            awaited=count("awaited"),
            excluded=count("excluded"),
            censored=count("censored"),
        )


def open_study(
    path: str | Path, *, reducing: bool = False, excluding: bool = True, checking: bool = False
) -> Study:
    """Read a study folder; nothing is written.

    With `reducing` plates may have no reading yet, and what was reduced before is not read; with
    `checking` they may have none where [assay] tells how reads give one. Without `excluding` wells
    and readings that were left out count as if they had not been.
    Raises StudyFaults with every fault of its files.
    """
    study = _read(Path(path), reducing, excluding, checking)
    ledger = read_ledger(study.folder)
    changes = changes_of(study, ledger, _read) if excluding and not reducing else Changes()
    told = [changes.notice, *ledger.problems[:1], unfinished_notice(study.folder)]
    notices = (*filter(None, told), *study.notices)
    return replace(study, notices=notices, changes=changes)


def _read(
    folder: Path, reducing: bool = False, excluding: bool = True, checking: bool = False
) -> Study:
    """Read a study folder by itself, without its ledger."""
    _check_folder(folder)
    found = Findings()
    definition = _read_definition(folder, found)
    paths = dict(table_files(folder / "plates", found))
    files = {name: f"plates/{path.name}" for name, path in paths.items()}
    plates = read_notes(folder, files, found)
    tables = {
        name: open_plate(path, files[name], definition, found) for name, path in paths.items()
    }
    if definition is None:
        raise StudyFaults(found.faults)
    unread = reducing or (checking and definition.assay is not None)
    wells = _read_wells(folder, definition, plates, tables, found, reducing, excluding, unread)
    stops = read_stops(folder, found)
    if not reducing:
        found.notices.extend(reduced_notices(folder, definition))
    if found.faults:
        raise StudyFaults(found.faults)
    study = Study(
        folder=folder,
        definition=definition,
        wells=wells,
        plates=tuple(plates.values()),
        notices=tuple(found.notices),
        stops=stops,
    )
    told = study.stopping.notice
    return replace(study, notices=(told, *study.notices)) if told else study


def stop_file(study: Study, today: date | None = None) -> dict[Path, str]:
    """Return the record of stop rules as it is to be written; nothing where all is on record."""
    day = datetime.now(UTC).date() if today is None else today
    text = stop_text(study.stopping, study.stops, day)
    return {} if text is None else {study.folder / STOP_FILE: text}


def keep_stop_rule(study: Study, today: date | None = None) -> Path | None:
    """Record the stop rule that holds where it is not on record yet; return the file written.

    Raises StudyFaults where the folder cannot be written.
    """
    written = stop_file(study, today)
    for path, text in written.items():
        write_atomic(path, text)
    return next(iter(written), None)


def _check_folder(folder: Path) -> None:
    problem, hint = "", ""
    if not folder.exists():
        problem, hint = "there is no such folder", "muntin new DIR makes one"
    elif not folder.is_dir():
        problem, hint = "is a file, not the folder of a study", "name the folder that holds it"
    elif not (folder / STUDY_FILE).is_file():
        problem, hint = f"holds no {STUDY_FILE}", "muntin new DIR writes one"
    if problem:
        raise StudyFaults([Fault(file=str(folder), problem=problem, hint=hint)])


def _read_definition(folder: Path, found: Findings) -> Definition | None:
    data = read_toml(folder / STUDY_FILE, STUDY_FILE, Definition, found.faults)
    definition = None if data is None else parse(Definition, data, STUDY_FILE, found.faults)
    if definition is None:
        return None
    faults = definition_faults(definition)
    found.faults.extend(faults)
    return sound_part(definition) if faults else definition


def _read_wells(
    folder: Path,
    definition: Definition,
    plates: dict[str, Plate],
    tables: dict[str, Table | None],
    found: Findings,
    reducing: bool,
    excluding: bool,
    may_be_unread: bool,
) -> pd.DataFrame:
    stocks = read_stocks(folder, definition, [*tables], found)
    parts = {
        name: read_plate(name, table, definition, stocks.get(name, ()), found)
        for name, table in tables.items()
        if table is not None
    }
    rows = [*parts.values()]
    passed = REDUCED if reducing else ""
    readings = _read_results(folder, definition, rows, tables, found, passed)
    frame = wells_table(definition, rows, readings, excluding)
    void = {name: plate.void for name, plate in plates.items() if plate.void}
    needed = {name: part.needed for name, part in parts.items() if name not in void}
    found.faults.extend(late_faults(definition, frame, readings))
    found.faults.extend(shared_column_faults(definition, tables, needed))
    found.faults.extend(copy_faults(plates, parts))
    if not found.faults:
        _take_stock(folder, definition, frame, parts, void, found, may_be_unread)
    return frame


def _read_results(
    folder: Path,
    definition: Definition,
    rows: list[PlateRows],
    tables: dict[str, Table | None],
    found: Findings,
    passed: str,
) -> dict[str, list[Reading]]:
    readings = {
        response.name: [reading for part in rows for reading in part.readings[response.name]]
        for response in definition.responses
    }
    places = [
        place
        for part in rows
        for place in zip(part.columns["plate"], part.columns["well"], strict=True)
    ]
    wells = {place: row for row, place in enumerate(places)}
    roles = [role for part in rows for role in part.columns["role"]]
    unread = [name for name, table in tables.items() if table is None]
    return join_results(folder, definition, Run(wells, roles, unread), readings, found, passed)


def _take_stock(
    folder: Path,
    definition: Definition,
    frame: pd.DataFrame,
    parts: dict[str, PlateRows],
    void: dict[str, str],
    found: Findings,
    may_be_unread: bool,
) -> None:
    informing = frame[frame["role"].isin(INFORMING)]
    fault = no_reading_fault(definition, informing[~informing["plate"].isin([*void])])
    if fault is not None and not may_be_unread:
        found.faults.append(fault)
    odd = odd_notices(definition, informing, void)
    found.notices[:0] = [*filled_plans(folder, definition, parts), *odd]
    found.notices.extend(definition_notices(definition))
    found.notices.extend(well_notices(definition, informing, void))
    for name, part in parts.items():
        found.notices.extend(outside_limits(name, definition, part))
    others = [name for part in parts.values() for name in part.others]
    found.notices.extend(column_notice(definition, others))
