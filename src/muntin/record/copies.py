"""Copies: a plate table kept twice would count each of its readings twice."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from muntin.record.faults import Fault
from muntin.record.notes import Plate
from muntin.record.plates import PlateRows
from muntin.record.readings import INFORMING

_LEAST = 6
Values = dict[tuple[str, str], float]


def copy_faults(plates: Mapping[str, Plate], rows: Mapping[str, PlateRows]) -> Iterator[Fault]:
    """Yield plates whose readings equal those of an earlier plate in every well and value.

    Six readings or more, not all alike, do not agree by chance. Plates that are void, or whose
    notes say that one repeats the other, pass.
    """
    earlier: list[tuple[Plate, Values]] = []
    for name, part in rows.items():
        plate, values = plates[name], _values(part)
        if plate.void or len(values) < _LEAST or len({*values.values()}) < 2:
            continue
        for other, theirs in earlier:
            if values == theirs and plate.repeats != other.name and other.repeats != name:
                yield _copy(plate, other, len(values))
                break
        earlier.append((plate, values))


def _values(part: PlateRows) -> Values:
    """The readings of a plate by well and response, those left out included."""
    wells, roles = part.columns["well"], part.columns["role"]
    return {
        (well, name): reading.value
        for name, readings in part.readings.items()
        for well, role, reading in zip(wells, roles, readings, strict=True)
        if reading.state == "read" and role in INFORMING
    }


def _copy(plate: Plate, other: Plate, count: int) -> Fault:
    notes = f"plates/{plate.name}.toml"
    return Fault(
        file=plate.file,
        problem=f"all {count} readings equal those of {other.file}",
        hint=f'remove one of them, or say repeats = "{other.name}" or void = "reason" in {notes}',
    )
