"""How much each factor moves a response: the table on the screen, and plain values for JSON."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import pandas as pd
from rich.console import RenderableType
from rich.table import Table

from muntin.record.faults import number
from muntin.record.responses import Response
from muntin.record.study import Study

_FEW = 0.01


def influence_lines(
    study: Study, tables: Mapping[str, pd.DataFrame], negligible: float | None
) -> list[RenderableType]:
    """Return a heading and a table a response, and what holds for all of them."""
    if not tables:
        return ["Nothing has been read yet, so no influence can be told."]
    lines: list[RenderableType] = []
    for response in study.definition.responses:
        if response.name in tables:
            lines.append(f"{response.label}: share of its variation over the range, 95 % intervals")
            lines.append(_table(study, response, tables[response.name], negligible))
    aside = "; [[limits]] are left aside" if study.definition.limits else ""
    return [*lines, f"Factors vary independently and evenly over their whole range{aside}."]


def influence_facts(tables: Mapping[str, pd.DataFrame], negligible: float | None) -> dict[str, Any]:
    """Return the tables, one mapping a factor, with the size that counts as negligible."""
    rows = {
        name: [
            {str(k): v for k, v in row.items()} for row in table.reset_index().to_dict("records")
        ]
        for name, table in tables.items()
    }
    return {"negligible": negligible, "responses": rows}


def _table(
    study: Study, response: Response, frame: pd.DataFrame, negligible: float | None
) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="dim")
    table.add_column("Factor")
    table.add_column("by itself")
    table.add_column("with interactions")
    if negligible is not None:
        size = f"{number(negligible)} {response.unit}".rstrip()
        table.add_column(f"moves it by less than {size}: probability")
    rows = _rows(frame)
    for factor in study.definition.factors:
        row = rows[factor.name]
        cells = [factor.label, _share(row, "first"), _share(row, "total")]
        if negligible is not None:
            cells.append(_chance(row["p_negligible"]))
        table.add_row(*cells)
    return table


def _rows(frame: pd.DataFrame) -> dict[str, dict[str, float]]:
    """Return the row of each factor."""
    rows = frame.to_dict("index").items()
    return {str(factor): {str(k): float(v) for k, v in row.items()} for factor, row in rows}


def _share(row: Mapping[str, float], name: str) -> str:
    """Return "62 % (48 to 75)"."""
    share, low, high = (100.0 * row[f"{name}{end}"] for end in ("", "_low", "_high"))
    return f"{share:.0f} % ({low:.0f} to {high:.0f})"


def _chance(p: float) -> str:
    """Return a probability with two decimals, never as a certainty: it is counted from draws."""
    if p < _FEW:
        return "under 0.01"
    return "over 0.99" if p > 1.0 - _FEW else f"{p:.2f}"
