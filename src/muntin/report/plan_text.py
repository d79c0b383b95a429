"""The next plate on the screen: how many wells of what, its conditions, the forecast."""

from __future__ import annotations

import textwrap
from collections import Counter
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from rich.table import Table
from rich.text import Text

from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import counted, listed
from muntin.report.words import amount_text, axis_label, condition_text, share_text

if TYPE_CHECKING:
    from muntin.bench.plan import Plan

_ROLES = {"test": "test well", "bridge": "bridging well", "reference": "reference well"}
_POINTS = 7
_NARROW, _WHY = 12, 20
_WIDTH, _GAP = 90, 2


def plan_heading(plan: Plan) -> str:
    """Return one sentence on the size of the plan."""
    count = Counter(plan.wells["role"])
    parts = [counted(count[role], name) for role, name in _ROLES.items() if count[role]]
    controls = sum(count.values()) - sum(count[role] for role in _ROLES)
    parts += [counted(controls, "control")] if controls else []
    used = "" if plan.protein_mg is None else f"; {amount_text(plan.protein_mg)} protein"
    return f"{plan.plate} (aim {plan.aim}, seed {plan.seed}): {', '.join(parts)}{used}."


def bridging_lines(definition: Definition, wells: pd.DataFrame) -> list[str]:
    """Return a line a condition that ties the new plate to the earlier ones."""
    bridging = wells[wells["role"].isin(["bridge", "reference"])]
    return [
        f"{len(rows)} × {condition_text(definition, rows.iloc[0].to_dict())}: "
        f"{rows['reason'].iloc[0]}."
        for rows in _lines(definition, bridging, definition.factors)
    ]


def usual_reason(wells: pd.DataFrame) -> str:
    """Return the reason that most test wells share, such as that of an opening plate."""
    return str(wells[wells["role"] == "test"]["reason"].mode().iloc[0])


def plan_table(definition: Definition, wells: pd.DataFrame, most: int, why: bool = True) -> Table:
    """Return the test wells in about so many rows, with probability and reason if `why`.

    A row a condition, where all of them fit; else, with two factors, a row a level of one of them;
    else the first conditions only.
    """
    tests = wells[wells["role"] == "test"]
    stock = _stock(definition, tests)
    lines = _lines(definition, tests, definition.factors)
    few_levels = len(definition.factors) == 2 and tests[stock.name].nunique() <= most
    if len(lines) > most and few_levels:
        return _conditions(definition, _lines(definition, tests, [stock]), 0, 0, why)
    rest = lines[most:]
    more = sum(len(rows) for rows in rest)
    return _conditions(definition, lines[:most], len(rest), more, why)


def _stock(definition: Definition, tests: pd.DataFrame) -> Factor:
    """The factor to group by: choices, else prepared stocks, else the fewest levels."""
    return min(
        definition.factors,
        key=lambda f: (f.continuous, f.per_plate is None, tests[f.name].nunique()),
    )


def _lines(definition: Definition, wells: pd.DataFrame, by: Sequence[Factor]) -> list[pd.DataFrame]:
    names = [factor.name for factor in by]
    order = list(dict.fromkeys([*names, *definition.factor_names]))
    ordered = wells.sort_values(order, kind="stable")
    return [rows for _, rows in ordered.groupby(names, sort=False)]


def _conditions(
    definition: Definition, lines: Sequence[pd.DataFrame], more: int, more_wells: int, why: bool
) -> Table:
    """The lines as a table; reasons take the room that settings leave them."""
    factors = definition.factors
    headings = ["wells", *(textwrap.fill(axis_label(f.label, f.unit), _NARROW) for f in factors)]
    headings += ["p now"] if why else []
    body = []
    for rows in lines:
        cells = [str(len(rows)), *(_levels(f, rows[f.name]) for f in factors)]
        body.append([*cells, _span(rows["p_now"])] if why else cells)
    table, left = _plain_table(), _WIDTH
    for column, heading in enumerate(headings):
        texts = [*heading.split("\n"), *(cells[column] for cells in body)]
        width = max(map(len, texts))
        table.add_column(heading, justify="right", no_wrap=True, min_width=width)
        left -= width + _GAP
    table.add_column("why" if why else "", max_width=max(left, _WHY))
    for cells, rows in zip(body, lines, strict=True):
        table.add_row(*map(Text, [*cells, _why(rows) if why else ""]))
    if more:
        said = f"{counted(more, 'more condition')}: see the plan's table"
        table.add_row(str(more_wells), *[""] * (len(headings) - 1), said)
    return table


def _levels(factor: Factor, values: pd.Series) -> str:
    count = Counter(values)
    texts = [
        factor.shown(value) + (f"(×{n})" if n > 1 and len(count) > 1 else "")
        for value, n in count.items()
    ]
    return listed(texts, 6)


def _span(p: pd.Series) -> str:
    low, high = f"{p.min():.2f}", f"{p.max():.2f}"
    return low if low == high else f"{low} to {high}"


def _why(rows: pd.DataFrame) -> str:
    """Return the reason of the well whose outcome is most open, the first wording of it."""
    openness = (rows["p_now"] - 0.5).abs().round(6)
    return str(rows.assign(open=openness).sort_values(["open", "reason"])["reason"].iloc[0])


def forecast_table(plan: Plan) -> Table:
    """Return the forecast at a few numbers of test wells: milligrams and share called wrongly."""
    forecast = plan.forecast
    rows = np.unique(np.linspace(0, len(forecast) - 1, _POINTS).round().astype(int))
    table = _plain_table()
    table.add_column("test wells")
    for row in rows:
        table.add_column(f"{int(forecast['wells'].iloc[row])}", justify="right")
    if "mg" in forecast:
        table.add_row("protein, mg", *(f"{mg:.3g}" for mg in forecast["mg"].iloc[rows]))
    shares = forecast["wrong_share"].iloc[rows]
    table.add_row("may be called wrongly", *map(share_text, shares))
    return table


def known_table(definition: Definition, known: pd.DataFrame, most: int = 20) -> Table:
    """Return the first conditions asked for: the factors, each response's mean and interval, and
    the probabilities.
    """
    table = _plain_table()
    for factor in definition.factors:
        table.add_column(axis_label(factor.label, factor.unit), justify="right")
    shown = [r for r in definition.responses if f"{r.name}_mean" in known]
    for response in shown:
        table.add_column(axis_label(response.label, response.unit) + ", mean (95 %)")
    chances = [name for name in ("p_mean", "p_well", "p_kept") if name in known]
    for name in chances:
        table.add_column(name, justify="right")
    for _, row in known.head(most).iterrows():
        cells = [f.shown(row[f.name]) for f in definition.factors]
        for r in shown:
            mean, low, high = (row[f"{r.name}_{end}"] for end in ("mean", "low", "high"))
            cells.append(f"{mean:.3g} ({low:.3g} to {high:.3g})")
        table.add_row(*map(Text, cells), *(f"{row[name]:.3f}" for name in chances))
    if len(known) > most:
        table.add_row(f"and {len(known) - most} more: use --out")
    return table


def _plain_table() -> Table:
    return Table(box=None, pad_edge=False, padding=(0, _GAP, 0, 0), header_style="dim")
