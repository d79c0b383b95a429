"""Plate lines that stocks feed: which level reaches which row or column."""

from __future__ import annotations

from typing import Any

import pandas as pd

from muntin.bench.wells import well_index
from muntin.record.definition import Definition
from muntin.record.readings import INFORMING


def line_of(definition: Definition, well: str) -> int | None:
    """The line of a well, counted from 0: its row or column, None where stocks go well by well."""
    by = definition.plan.prepared_by
    return None if by == "well" else well_index(well, definition.plate)[0 if by == "row" else 1]


def fed_lines(definition: Definition, rows: pd.DataFrame) -> dict[int, dict[str, Any]]:
    """Return the levels of the stocks' factors (raw units) on each line that a stock feeds.

    rows: well, role and the factors of a plan in which no line has two stocks.
    """
    fed: dict[int, dict[str, Any]] = {}
    for row in rows[rows["role"].isin(INFORMING)].to_dict("records"):
        line = line_of(definition, row["well"])
        if line is not None:
            fed[line] = {name: row[name] for name in definition.stock_factors}
    return dict(sorted(fed.items()))
