"""Column runs on the screen: what to run, what was predicted, and column minus plate."""

from __future__ import annotations

from collections.abc import Sequence
from math import floor, log10
from pathlib import Path

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from muntin.confirmation.comparison import Compared, Comparison, Shift
from muntin.record.column_plan import COLUMNS, ColumnPlan, PlannedRun
from muntin.record.column_runs import OnRecord
from muntin.record.definition import Definition
from muntin.record.faults import counted, listed, number
from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.report.text import few, sheet
from muntin.report.words import amount_text, joined

_GAP = 2
_WHOLE = ("predicted", "column", "column - plate", "verdict")
_SIGNS = {-1: "<", 0: "", 1: ">"}
_ODDS = (
    "Off: by more than predicted (95 %), as one run in twenty is where columns read as plates do."
)
_APART = "Columns are never pooled with wells: no probability rests on them."
_CAUTIONS = (
    "The intervals are those of a new well on a new plate. A column has a residence time, a "
    "gradient or steps, flow and a pool, none of which a plate has.",
    "Fix flow, gradient and where the pool is cut before the runs, alike in all: recovery and "
    "purity move with the cut.",
    "Load as on the plates; what binds near equilibrium need not bind in a residence time.",
    "Two or three runs say little of how much columns differ from run to run.",
    "Development aid, not for release decisions.",
)


def column_cautions(definition: Definition) -> tuple[str, ...]:
    """Return the cautions that go with column runs."""
    columns, contact = definition.columns, definition.fixed.get("contact_minutes")
    if columns is None or columns.residence_min is None or not isinstance(contact, float | int):
        return _CAUTIONS
    times = (
        f"Protein and resin met for {number(contact)} min on the plates, for "
        f"{number(columns.residence_min)} min in the column while loading."
    )
    return (*_CAUTIONS[:3], times, *_CAUTIONS[3:])


def columns_line(columns: OnRecord) -> list[str]:
    """Return how many column runs were planned and made, and notices; nothing without a plan."""
    if not columns.plans:
        return []
    planned = sum(len(plan.runs) for plan in columns.plans)
    made = f"{len(columns.made)} made; muntin confirm compares them"
    return [f"{COLUMNS}/: {counted(planned, 'column run')} planned, {made}", *columns.notices]


def column_screen(
    study: Study,
    plans: Sequence[ColumnPlan],
    comparison: Comparison,
    written: Sequence[Path],
    notices: Sequence[str],
) -> RenderableType:
    """Return the screen of `confirm`: the plan while runs are awaited, and what came of others."""
    definition = study.definition
    awaited = {run.run for run in comparison.awaited}
    return sheet(
        f"{definition.title}: column runs",
        [
            ("Noted", few([*notices, *plans[-1].notices], 5, "see --json")),
            ("Planned", _planned(definition, plans, awaited)),
            ("Column", _came(definition, comparison)),
            ("Shift", _shift_lines(definition, comparison)),
            ("Left out", _left_out(comparison)),
            ("Verdict", _verdict(definition, comparison)),
            ("Caution", column_cautions(definition)),
            ("Written", [", ".join(map(str, written))] if written else []),
            ("Next", _next(written, comparison)),
        ],
    )


def _planned(
    definition: Definition, plans: Sequence[ColumnPlan], awaited: set[int]
) -> list[RenderableType]:
    """The runs that are awaited, with what was predicted of them."""
    shown = [plan for plan in plans if any(run.run in awaited for run in plan.runs)]
    lines: list[RenderableType] = []
    for plan in shown:
        runs = [run for run in plan.runs if run.run in awaited]
        mg = [run.protein_mg for run in runs if run.protein_mg is not None]
        takes = f", {amount_text(sum(mg))} of protein" if mg else ""
        day = plan.written_at.replace("T", " ").removesuffix("+00:00")
        lines.append(
            f"{counted(len(runs), 'run')}{takes}, predicted on {day} UTC (seed {plan.seed})."
        )
        lines.append(_plan_table(definition, plan, runs))
    return lines


def _plan_table(
    definition: Definition, plan: ColumnPlan, runs: Sequence[PlannedRun]
) -> RenderableType:
    told = {one.response for one in plan.predictions}
    responses = [r for r in definition.responses if r.name in told]
    headings = [_with_unit(r.label, r.unit) for r in responses]
    table = _grid("run", "place", *_factor_headings(definition), "p", *headings)
    rows = {run.run: i for i, run in enumerate(plan.runs)}
    for run in runs:
        cells = [str(run.run), run.place, *_settings(definition, run), f"{run.probability:.2f}"]
        for response in responses:
            one = next(p for p in plan.predictions if p.response == response.name)
            i = rows[run.run]
            cells.append(_spread(one.mean[i], one.reading_low[i], one.reading_high[i]))
        table.add_row(*map(Text, cells))
    return table


def _came(definition: Definition, comparison: Comparison) -> list[RenderableType]:
    lines: list[RenderableType] = []
    for response in definition.responses:
        mine = [one for one in comparison.compared if one.response == response.name]
        if mine:
            lines.append(f"{_with_unit(response.label, response.unit)}{_target(response)}:")
            lines.append(_came_table(mine))
    return [*lines, _ODDS, _APART] if lines else []


def _came_table(compared: Sequence[Compared]) -> Table:
    table = _grid("run", "predicted", "column", "column - plate", "verdict")
    for one in compared:
        table.add_row(*map(Text, _came_cells(one)))
    return table


def _came_cells(one: Compared) -> list[str]:
    difference, verdict = "-", ""
    if one.difference is not None and one.low is not None and one.high is not None:
        difference = _spread(one.difference, one.low, one.high, plus=True)
        verdict = "off" if one.verdict == "off by more than predicted" else "agrees"
    return [
        f"{one.run.run} {one.run.place}",
        _spread(one.predicted, one.reading_low, one.reading_high),
        f"{_SIGNS[one.side]}{figure(one.reading, 4)}",
        difference,
        verdict,
    ]


def _target(response: Response) -> str:
    ends = [
        f"{word} {number(limit)}"
        for word, limit in (("at least", response.at_least), ("at most", response.at_most))
        if limit is not None
    ]
    return f", {joined(ends)}" if ends else ""


def _shift_lines(definition: Definition, comparison: Comparison) -> list[str]:
    """The shift of each response, and, where it is one, what the runs say beside it."""
    lines = []
    for shift in comparison.shifts:
        lines.append(_shift_line(definition, shift))
        if shift.verdict != "none to be told":
            mine = [one for one in comparison.compared if one.response == shift.response]
            off = [f"run {one.run.run}" for one in mine if one.beside_off]
            more = "off by more than predicted"
            lines.append(
                f"Less that shift {joined(off)} {'is' if len(off) == 1 else 'are'} {more}."
                if off
                else "Less that shift all runs agree."
            )
    return lines


def _shift_line(definition: Definition, shift: Shift) -> str:
    response = next(r for r in definition.responses if r.name == shift.response)
    runs = f"over {counted(shift.runs, 'run')}"
    if shift.ratio:
        size = f"{figure(shift.mean)} times what was predicted"
        interval = f"95 % {figure(shift.low)} to {figure(shift.high)} times"
        plate = f"by a factor of {figure(shift.plate)}"
    else:
        unit = f" {response.unit}".rstrip()
        size = f"{shift.mean:+.2g}{unit} against what was predicted"
        interval = f"95 % {shift.low:+.2g} to {shift.high:+.2g}"
        plate = f"by {figure(shift.plate, 2)}{unit}"
    said = {
        "none to be told": "the runs tell of no shared shift",
        "no more than a new plate": f"a shared shift, but a new plate may be off {plate} as well",
        "more than plates differ": f"a shared shift, more than a new plate explains ({plate})",
    }
    return f"{response.label}: {size} {runs} ({interval}): {said[shift.verdict]}."


def _left_out(comparison: Comparison) -> list[str]:
    return [
        f"run {run.run}: "
        + "; ".join([run.excluded, *(r.reason for r in run.readings.values())]).strip("; ")
        for run in comparison.left_out
    ]


def _verdict(definition: Definition, comparison: Comparison) -> list[str]:
    compared = [one for one in comparison.compared if one.difference is not None]
    if not compared:
        return []
    labels = {r.name: r.label for r in definition.responses}
    off = [one for one in compared if one.verdict == "off by more than predicted"]
    missed = [one for one in comparison.compared if one.meets is False]
    met = [one for one in comparison.compared if one.meets]
    lines = [
        f"All {counted(len(compared), 'reading')} of columns agree with what plates predicted."
        if not off
        else f"{len(off)} of {counted(len(compared), 'reading')} off by more than predicted: "
        f"{_named(off, labels)}."
    ]
    if missed:
        lines.append(f"The target is missed on columns: {_named(missed, labels)}.")
    elif met:
        lines.append(f"{counted(len(met), 'reading')} of columns meet their targets, none misses.")
    far = [shift for shift in comparison.shifts if shift.verdict == "more than plates differ"]
    if far:
        names = joined([labels[shift.response] for shift in far])
        lines.append(f"Columns shift {names}: the window holds for plates, not for these columns.")
    if comparison.awaited:
        runs = listed(str(run.run) for run in comparison.awaited)
        many = "run" if len(comparison.awaited) == 1 else "runs"
        lines.append(
            f"Still awaited: {many} {runs}; confirm set point and both edges before quoting."
        )
    return lines


def _named(compared: Sequence[Compared], labels: dict[str, str]) -> str:
    return joined([f"{labels[one.response]} of run {one.run.run}" for one in compared])


def _next(written: Sequence[Path], comparison: Comparison) -> list[str]:
    if not comparison.awaited:
        return []
    table = next((path.name for path in written if path.suffix == ".csv"), "plan.csv")
    return [
        f"Run them, fill in the readings of {COLUMNS}/{table} and save it as "
        f"{COLUMNS}/column-01.csv (02 and so on for later runs); muntin confirm then compares."
    ]


def _grid(*headings: str) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, _GAP, 0, 0), header_style="dim")
    for heading in headings:
        table.add_column(heading, no_wrap=heading in _WHOLE, overflow="fold")
    return table


def _factor_headings(definition: Definition) -> list[str]:
    return [_with_unit(factor.label, factor.unit) for factor in definition.factors]


def _with_unit(label: str, unit: str) -> str:
    return f"{label} ({unit})" if unit else label


def _settings(definition: Definition, run: PlannedRun) -> list[str]:
    return [factor.shown(run.condition[factor.name]) for factor in definition.factors]


def _spread(middle: float, low: float, high: float, plus: bool = False) -> str:
    """Return "0.93 (0.85 to 0.98)", each with the digits that the width deserves."""
    digits = _digits(high - low)
    told = [round(value, digits) + 0.0 for value in (middle, low, high)]
    shown = [f"{value:{'+' if plus and value else ''}.{digits}f}" for value in told]
    return f"{shown[0]} ({shown[1]} to {shown[2]})"


def _digits(width: float) -> int:
    """Decimals that tell a fifth of a width."""
    return max(0, -floor(log10(width / 5.0))) if width > 0 else 2


def figure(value: float, digits: int = 3) -> str:
    """Return a figure with so many significant digits at most, and no exponent."""
    return number(float(f"{value:.{digits}g}"))
