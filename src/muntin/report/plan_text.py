"""The next plate on the screen: how many wells of what, its conditions, the forecast."""

from __future__ import annotations

import io
import re
import textwrap
from collections import Counter
from collections.abc import Sequence
from typing import TYPE_CHECKING

import pandas as pd
from rich.console import Console, RenderableType
from rich.table import Table
from rich.text import Text

from muntin.bench.outlay import COUNTS
from muntin.bench.protein import protein_left_mg
from muntin.design.stopping import asked_of_set_point
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import counted
from muntin.record.offers import without_measured
from muntin.record.study import Study
from muntin.report.ruling_text import wrong_share_texts
from muntin.report.words import (
    UNSUPPORTED,
    WINDOW,
    amount_text,
    axis_label,
    condition_text,
    joined,
    likely_text,
    narrow,
    per_cent,
    share_text,
)

if TYPE_CHECKING:
    from muntin.bench.plan import Plan

_ROLES = {"test": "test well", "bridge": "bridging well", "reference": "reference well"}
_OUTLAY = {
    "plates": "plates",
    "mg": "protein, mg",
    "assays": "assay slots",
    "days": "days",
}
_TIES = ": ties plates"
_AGAIN = re.compile(r"well \d+ of this condition")
_NARROW, _WHY = 12, 20
_WIDTH, _GAP = 90, 2
_MOST_LINES = 14
_REASONS = 2


def plan_heading(plan: Plan) -> str:
    """Return one sentence on the size of the plan."""
    count = Counter(plan.wells["role"])
    parts = [counted(count[role], name) for role, name in _ROLES.items() if count[role]]
    controls = sum(count.values()) - sum(count[role] for role in _ROLES)
    parts += [counted(controls, "control")] if controls else []
    used = "" if plan.protein_mg is None else f"; {amount_text(plan.protein_mg)} protein"
    return f"{plan.plate} (aim {plan.aim}, seed {plan.seed}): {', '.join(parts)}{used}."


def bridging_line(definition: Definition, wells: pd.DataFrame, most: int = 2) -> list[str]:
    """Return the conditions that tie the new plate to the earlier ones in one line, if any."""
    bridging = wells[wells["role"].isin(["bridge", "reference"])]
    lines = _lines(definition, bridging, definition.factors)
    texts = [
        f"{len(rows)} × {condition_text(definition, rows.iloc[0].to_dict())} "
        f"({str(rows['reason'].iloc[0]).removesuffix(_TIES)})"
        for rows in lines[:most]
    ]
    more = [f"{len(lines) - most} more conditions: see the plan's table"] if lines[most:] else []
    return [f"Bridging: {'; '.join([*texts, *more])}."] if texts else []


def usual_reason(wells: pd.DataFrame) -> str:
    """Return the reason that most test wells share, such as that of an opening plate."""
    return str(wells[wells["role"] == "test"]["reason"].mode().iloc[0])


def plan_tables(definition: Definition, wells: pd.DataFrame, why: bool = True) -> list[Table]:
    """Return tables that show all test wells in 14 lines, those that say most first.

    A row a condition; a row a level of one factor; only the conditions, one after the other.
    Probability and reason stand in the first two if `why`.
    """
    tests = wells[wells["role"] == "test"]
    tables = [
        _conditions(definition, _lines(definition, tests, definition.factors), why),
        *(_grouped(definition, tests, by, why) for by in _groupings(definition, tests)),
        _row_of_all(definition, tests),
    ]
    return [table for table in tables if _body_lines(table) <= _MOST_LINES]


def first_conditions(
    definition: Definition, wells: pd.DataFrame, most: int, why: bool = True
) -> Table:
    """Return a table of so many conditions, and how many more there are."""
    lines = _lines(definition, wells[wells["role"] == "test"], definition.factors)
    rest = lines[most:]
    return _conditions(definition, lines[:most], why, len(rest), sum(map(len, rest)))


def _groupings(definition: Definition, tests: pd.DataFrame) -> list[Factor]:
    """The factors to group by: prepared stocks, the first one, then those of fewest levels."""
    first = [f for f in definition.factors if f.per_plate is not None][:1]
    fewest = sorted(definition.factors, key=lambda f: tests[f.name].nunique())
    by_name = {f.name: f for f in (*first, definition.factors[0], *fewest)}
    return [*by_name.values()] if len(definition.factors) > 1 else []


def height(screen: RenderableType, width: int = 100) -> int:
    """Return the lines that a screen takes at so many columns."""
    return len(Console(width=width, file=io.StringIO()).render_lines(screen))


def _body_lines(table: Table) -> int:
    headings = max(str(column.header).count("\n") + 1 for column in table.columns)
    return height(table, _WIDTH) - headings


def _lines(definition: Definition, wells: pd.DataFrame, by: Sequence[Factor]) -> list[pd.DataFrame]:
    names = [factor.name for factor in by]
    order = list(dict.fromkeys([*names, *definition.factor_names]))
    ordered = wells.sort_values(order, kind="stable")
    return [rows for _, rows in ordered.groupby(names, sort=False)]


def _conditions(
    definition: Definition,
    lines: Sequence[pd.DataFrame],
    why: bool,
    more: int = 0,
    more_wells: int = 0,
) -> Table:
    """A row a condition; `more` are the conditions left out, with so many wells."""
    factors = definition.factors
    body = [
        [
            str(len(rows)),
            *(f.shown(rows[f.name].iloc[0]) for f in factors),
            *_said(rows, definition.factors, why),
        ]
        for rows in lines
    ]
    table = _filled(["wells", *map(_heading, factors)], body, [], why)
    if more:
        said = counted(more, "more condition")
        blanks = [""] * (len(table.columns) - 2)
        table.add_row(str(more_wells), *blanks, said)
    return table


def _grouped(definition: Definition, tests: pd.DataFrame, by: Factor, why: bool) -> Table:
    """A row a level of one factor, the conditions of the others in one cell."""
    others = [factor for factor in definition.factors if factor.name != by.name]
    body = [
        [
            str(len(rows)),
            by.shown(rows[by.name].iloc[0]),
            _settings(others, rows),
            *_said(rows, definition.factors, why),
        ]
        for rows in _lines(definition, tests, [by])
    ]
    return _filled(["wells", _heading(by)], body, others, why)


def _row_of_all(definition: Definition, tests: pd.DataFrame) -> Table:
    """All conditions in one cell."""
    factors = definition.factors
    ordered = pd.concat(_lines(definition, tests, factors))
    return _filled(["wells"], [[str(len(tests)), _settings(factors, ordered)]], factors, False)


def _filled(
    headings: Sequence[str], body: Sequence[Sequence[str]], gathered: Sequence[Factor], why: bool
) -> Table:
    """A table of cells: plain ones, then a cell of `gathered` settings if any, then p now and why.

    Gathered settings and reasons share the room that the other columns leave.
    """
    plain = [*headings, *(["p now"] if why else [])]
    at = [*range(len(headings)), *([len(body[0]) - 2] if why else [])]
    widths = [
        max(map(len, [*heading.split("\n"), *(cells[i] for cells in body)]))
        for heading, i in zip(plain, at, strict=True)
    ]
    left = _WIDTH - sum(widths) - _GAP * len(widths)
    table = _plain_table()
    for heading, width in zip(headings, widths, strict=False):
        table.add_column(heading, justify="right", no_wrap=True, min_width=width)
    if gathered:
        reasons = max((len(cells[-1]) for cells in body), default=0) if why else 0
        room = max(left - _GAP - reasons, (left - _GAP) // 2)
        widest = max(len(cells[len(headings)]) for cells in body)
        table.add_column(" / ".join(axis_label(f.label, f.unit) for f in gathered), max_width=room)
        left -= min(room, widest) + _GAP
    if why:
        table.add_column("p now", justify="right", no_wrap=True, min_width=widths[-1])
        table.add_column("why", max_width=max(left, _WHY))
    for cells in body:
        table.add_row(*map(Text, cells))
    return table


def _heading(factor: Factor) -> str:
    return textwrap.fill(axis_label(factor.label, factor.unit), _NARROW)


def _said(rows: pd.DataFrame, factors: Sequence[Factor], why: bool) -> list[str]:
    return [_span(rows["p_now"]), why_text(rows, factors)] if why else []


def _settings(factors: Sequence[Factor], rows: pd.DataFrame) -> str:
    """Return conditions such as "5.0/100, 5.0/200(×2)", in the order of the rows."""
    shown = ["/".join(f.shown(row[f.name]) for f in factors) for _, row in rows.iterrows()]
    count = Counter(shown)
    alone = len(count) == 1
    return ", ".join(text + (f"(×{n})" if n > 1 and not alone else "") for text, n in count.items())


def _span(p: pd.Series) -> str:
    low, high = f"{p.min():.2f}", f"{p.max():.2f}"
    return low if low == high else f"{low} to {high}"


def why_text(rows: pd.DataFrame, factors: Sequence[Factor]) -> str:
    """Return the reasons of the wells, that of the wells whose outcome is most open first.

    What the row's other cells say, probability and setting, is left out, and so is what
    repeats the condition, where not all wells do; wells that average the noise have the reason
    of their condition.
    """
    openness = (rows["p_now"] - 0.5).abs().round(6)
    ordered = rows.assign(open=openness).sort_values(["open", "reason"])["reason"]
    setting = "|".join(re.escape(f.label) for f in factors)
    left_out = rf"probability [0-9.]+, | at ({setting}) \S+$"
    said = [re.sub(left_out, "", without_measured(str(reason))) for reason in ordered]
    alike = [text for text in said if not _AGAIN.match(text)] or said
    if len(set(alike)) > 1:
        alike = [re.sub(r"^repeats [^:]+: ", "", text) for text in alike]
    count = Counter(alike)
    if len(count) == 1:
        return alike[0]
    parts = [f"{text} ({n})" for text, n in count.items()]
    return "; ".join([*parts[:_REASONS], *(["others"] if parts[_REASONS:] else [])])


def forecast_table(study: Study, plan: Plan, full: bool = True) -> Table:
    """Return the forecast: what so many test wells take, and what they are expected to bring.

    In short plates are left out, and of the set point only that is said which the stop rule asks;
    nothing is where the data do not support the window.
    """
    forecast, rule, left = plan.forecast, study.stopping.rule, protein_left_mg(study)
    table = _plain_table()
    table.add_column("test wells")
    for wells in forecast["wells"]:
        table.add_column(f"{int(wells)}", justify="right", no_wrap=True)
    for name, label in _OUTLAY.items():
        if name in forecast and (name != "plates" or (full and forecast[name].max() > 1)):
            digits = ".1f" if name == "days" else ".3g"
            of = f" of {left:.3g}" if name == "mg" and left is not None else ""
            table.add_row(label + of, *(f"{value:{digits}}" for value in forecast[name]))
    table.add_row("may be called wrongly", *map(narrow, wrong_share_texts(study, plan)))
    if forecast["set_point"].isna().all():
        return table
    asked = rule is not None and rule.best_probability is not None
    if full or not asked:
        table.add_row("set point passes", *(narrow(share_text(p)) for p in forecast["set_point"]))
    if full or asked:
        reaches = f"chance set point reaches {per_cent(asked_of_set_point(study))}"
        today, *then = forecast["reached"]
        table.add_row(reaches, "yes" if today else "no", *(narrow(likely_text(p)) for p in then))
    return table


def no_set_point_line(plan: Plan, where: str = "") -> list[str]:
    """Return why a forecast has no set point, where it has none; `where` tells of more."""
    if plan.forecast["set_point"].notna().any():
        return []
    return [
        f"No set point is forecast: the {WINDOW} is {UNSUPPORTED}{where}. What "
        "may be called wrongly holds only as far as the model does."
    ]


def not_forecast_line(study: Study, plan: Plan) -> list[str]:
    """Return why larger numbers of wells are not forecast, where they are not."""
    beyond = [str(k) for k in COUNTS if k > plan.forecast["wells"].max()]
    if not beyond:
        return []
    short = protein_left_mg(study) is not None
    why = "the protein left does not reach" if short else "they do not fit on the free wells"
    return [f"Not forecast for {joined(beyond)}: {why}."]


def known_table(definition: Definition, known: pd.DataFrame, most: int = 20) -> Table:
    """Return the first conditions asked for: the factors, each response's mean and interval, and
    the probabilities.
    """
    table = _plain_table()
    for factor in definition.factors:
        table.add_column(axis_label(factor.label, factor.unit), justify="right")
    shown = [r for r in definition.responses if f"{r.name}_mean" in known]
    for response in shown:
        table.add_column(
            axis_label(response.label, response.unit) + ", mean (95 %)", no_wrap=not shown[1:]
        )
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
