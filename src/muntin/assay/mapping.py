"""Column mapping: tables of reads under headings of the user's own."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from muntin.record.faults import Fault, Findings, did_you_mean
from muntin.record.tables import Table


def mapped(table: Table, columns: Mapping[str, str], found: Findings) -> Table:
    """Return the table under our headings; `columns` maps them to those of the table.

    A heading that the table lacks is no fault where ours stands in its place.
    """
    by_fold = {name.casefold(): name for name in table.columns}
    ours = {}
    for name, theirs in columns.items():
        heading = by_fold.get(theirs.casefold())
        if heading is not None:
            ours[heading] = name
        elif name not in table.columns:
            hint = f"assay, columns, {name}; {did_you_mean(theirs, [*table.columns])}"
            found.faults.append(
                Fault(file=table.file, problem=f"has no column {theirs}", hint=hint)
            )
    renamed = {ours.get(name, name): cells for name, cells in table.columns.items()}
    return replace(table, columns=renamed)
