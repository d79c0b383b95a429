"""Plans that were filled in where they were written: their readings count only in plates/."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from pathlib import Path

from muntin.record.definition import Definition
from muntin.record.faults import Findings, counted
from muntin.record.plates import PlateRows, plate_columns
from muntin.record.tables import read_table, table_files

_REVISION = re.compile(r"\.r[0-9]+$")


def filled_plans(
    folder: Path, definition: Definition, rows: Mapping[str, PlateRows]
) -> Iterator[str]:
    """Yield a notice of each plan that holds readings which the plates do not.

    `rows` are the plates that were read. A plan that cannot be read is passed over: it counts for
    nothing, and its faults are found once it is moved.
    """
    known, passed_over = plate_columns(definition), Findings()
    for stem, path in table_files(folder / "plans", passed_over):
        table = read_table(path, f"plans/{path.name}", known, passed_over)
        if table is None:
            continue
        cells = [cell for r in definition.responses for cell in table.cells(r.name) if cell]
        plate = _REVISION.sub("", stem)
        there = rows.get(plate)
        run = 0 if there is None else len(there.columns["well"])
        held = (
            0 if there is None else sum(bool(r.text) for of in there.readings.values() for r in of)
        )
        file = f"plans/{path.name} holds {counted(len(cells), 'reading')}"
        if cells and not run:
            name = "" if stem == plate else f" as {plate}{path.suffix}"
            empty = "" if there is None else ", in place of the empty table there,"
            yield f"{file}: move it to plates/{name}{empty} to have them counted"
        elif len(cells) > held:
            yield f"{file}, the table of {plate} in plates/ {held}: only the latter count"
