"""Plates and the notes beside them: who, when, which lots, and whether they count."""

from __future__ import annotations

import datetime
from pathlib import Path
from typing import Annotated

from pydantic import BeforeValidator

from muntin.record.cells import CellError, parse_reason
from muntin.record.faults import Fault, Findings, did_you_mean, quoted
from muntin.record.keys import Keys, Number, Text, key
from muntin.record.toml_files import parse, read_toml


def _reason(value: object) -> object:
    if isinstance(value, bool):
        value = str(value).lower()
    if isinstance(value, str):
        try:
            return parse_reason(value.strip() or "-")
        except CellError as error:
            raise ValueError(f"{error}; say in words why the plate does not count") from None
    return value


class PlateNotes(Keys):
    """Notes on one plate, all optional."""

    date: datetime.date | None = key(None, says="day on which it was run", example="2026-05-04")
    by: Text | None = key(None, says="who ran it", example="lab 2")
    resin_lot: Text | None = key(None, says="lot of the resin", example="R-17")
    feed_lot: Text | None = key(None, says="lot of the feed", example="F-3")
    feed_age_days: Number | None = key(None, says="age of the feed", unit="days", example=2, ge=0)
    void: Annotated[Text | None, BeforeValidator(_reason)] = key(
        None, says="why the plate does not count; it stays on record", example="feed was warm"
    )
    repeats: Text | None = key(None, says="plate that this one repeats", example="plate-00")


class Plate(PlateNotes):
    """A plate that was run: its name, the table it was read from, and its notes."""

    name: str
    file: str


def read_notes(folder: Path, tables: dict[str, str], found: Findings) -> dict[str, Plate]:
    """Return the plates by name with their notes; `tables` maps names to files as shown."""
    plates = {name: Plate(name=name, file=file) for name, file in tables.items()}
    for path in sorted((folder / "plates").glob("*.toml")):
        file = f"plates/{path.name}"
        data = read_toml(path, file, PlateNotes, found.faults)
        notes = None if data is None else parse(PlateNotes, data, file, found.faults)
        if path.stem not in tables:
            not_run(folder, path.stem, file, [*tables], found)
        elif notes is not None:
            given = notes.model_dump()
            plates[path.stem] = Plate(name=path.stem, file=tables[path.stem], **given)
    for plate in plates.values():
        _check_repeats(plate, [*plates], found)
    return plates


def _check_repeats(plate: Plate, names: list[str], found: Findings) -> None:
    if plate.repeats is None or (plate.repeats in names and plate.repeats != plate.name):
        return
    others = [name for name in names if name != plate.name]
    found.faults.append(
        Fault(
            file=f"plates/{plate.name}.toml",
            where="repeats",
            value=quoted(plate.repeats),
            problem="is not another plate of this study",
            hint=did_you_mean(plate.repeats, others) if others else "",
        )
    )


def not_run(folder: Path, plate: str, file: str, names: list[str], found: Findings) -> None:
    """Note a file about a plate that is planned, or report one about a plate nobody knows."""
    if any((folder / "plans" / f"{plate}{end}").is_file() for end in (".csv", ".xlsx")):
        until = "but for its plan, " if file.startswith("stocks/") else ""
        found.notices.append(f"{file} is not used yet, {until}as {plate} is planned and not run")
        return
    found.faults.append(
        Fault(
            file=file,
            problem=f"belongs to no plate; there is no plates/{plate}.csv or .xlsx",
            hint=did_you_mean(plate, names) if names else "",
        )
    )
