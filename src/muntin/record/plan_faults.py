"""What keeps rows of an edited plan from being run: steps, ranges, limits, levels, plate lines."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd

from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import Fault, Findings, did_you_mean, listed, number, quoted
from muntin.record.keys import Floats, Truths
from muntin.record.limits import sample_conditions
from muntin.record.tables import Table
from muntin.record.wells import position


def step_faults(
    table: Table, factor: Factor, targets: Floats, needed: Truths, found: Findings
) -> Floats:
    """Return the targets (raw unit) put exactly on the levels of new plans. A needed one that lies
    on none becomes NaN and joins `found`, with the nearest; one outside the range is told already.
    """
    low, high, step = factor.span
    levels = factor.plan_levels().astype(float)
    out = targets.copy()
    for row in np.flatnonzero(np.isfinite(targets)).tolist():
        value = float(targets[row])
        close = float(levels[np.abs(levels - value).argmin()])
        if abs(close - value) <= 1e-6 * step:
            out[row] = close
        elif needed[row]:
            out[row] = np.nan
            if low - 1e-6 * step <= value <= high + 1e-6 * step:
                found.faults.append(_off_step(table, factor, row, value, close))
    return out


def _off_step(table: Table, factor: Factor, row: int, value: float, close: float) -> Fault:
    low, _, step = factor.span
    first, last = (float(end) for end in factor.plan_levels()[[0, -1]])
    rule = f"study.toml, factors, {factor.name}: "
    if not first <= value <= last:
        span = f"{factor.shown(first)} to {factor.shown(last)} {factor.unit}".rstrip()
        hint = f"{rule}plan_low, plan_high; nearest is {factor.shown(close)}"
        return table.fault(row, factor.name, "lies outside new plans,", span, hint)
    hint = f"{rule}steps of {number(step)} from {number(low)}"
    problem = "is not on a bench step; nearest is"
    return table.fault(row, factor.name, problem, factor.shown(close), hint)


def condition_faults(
    table: Table, definition: Definition, frame: pd.DataFrame, whole: Truths
) -> Iterator[Fault]:
    """Yield the conditions that new plans may not run: choices, limits, forbidden ones."""
    rows = np.flatnonzero(whole)
    for factor in definition.factors:
        chosen = [] if factor.plan_choices is None else [*factor.plan_choices]
        for row in rows.tolist() if chosen else []:
            choice = str(frame[factor.name][row])
            if choice in (factor.choices or ()) and choice not in chosen:
                hint = did_you_mean(choice, chosen)
                rule = f"study.toml, factors, {factor.name}, plan_choices; {hint}"
                yield table.fault(row, factor.name, "is not a choice of new plans", hint=rule)
    conditions = frame.loc[rows, [*definition.factor_names]].infer_objects()
    for index, limit in enumerate(definition.limits, start=1):
        for row in rows[~limit.holds(conditions)].tolist():
            rule = f"study.toml, limits {index}"
            yield _broken(table, definition, frame, row, "breaks", limit.allow, rule)
    for index, rule_ in enumerate(definition.forbidden, start=1):
        for row in rows[rule_.covers(conditions)].tolist():
            rule = f"study.toml, forbidden {index}: {rule_.because}"
            yield _broken(table, definition, frame, row, "is forbidden:", rule_.conditions, rule)


def _broken(
    table: Table,
    definition: Definition,
    frame: pd.DataFrame,
    row: int,
    problem: str,
    rule: str,
    where: str,
) -> Fault:
    condition = frame.iloc[row]
    close = _nearest_condition(definition, condition)
    return Fault(
        file=table.file,
        where=table.where[row],
        value=_shown(definition, condition),
        problem=problem,
        allowed=quoted(rule),
        hint=where + (f"; nearest that may be run: {close}" if close else ""),
    )


def _shown(definition: Definition, row: pd.Series) -> str:
    return ", ".join(f"{f.name} {f.shown(row[f.name])}" for f in definition.factors)


def _nearest_condition(definition: Definition, row: pd.Series) -> str:
    """The nearest condition that may be planned, in shares of the ranges; choices count as one."""
    box = sample_conditions(definition.factors, planned=True)
    box = box[definition.allowed(box) & ~definition.forbids(box)]
    away = np.zeros(len(box))
    for factor in definition.factors:
        if factor.continuous:
            low, high, _ = factor.span
            off = box[factor.name].to_numpy(dtype=float) - row[factor.name]
            away += (off / (high - low)) ** 2
        else:
            away += (box[factor.name] != row[factor.name]).to_numpy(dtype=float)
    return _shown(definition, box.iloc[int(away.argmin())]) if len(box) else ""


def level_faults(
    table: Table, definition: Definition, frame: pd.DataFrame, whole: Truths
) -> Iterator[Fault]:
    """Yield the factors with more levels in the plan than per_plate allows."""
    for factor in definition.factors:
        if factor.per_plate is None:
            continue
        used = frame.loc[whole, factor.name]
        levels = sorted(set(used))
        if len(levels) > factor.per_plate:
            rarest = min(levels, key=lambda level: int((used == level).sum()))
            yield Fault(
                file=table.file,
                column=factor.name,
                value=listed(map(factor.shown, levels)),
                problem=f"are {len(levels)} levels; per_plate allows",
                allowed=str(factor.per_plate),
                hint=f"study.toml, factors, {factor.name}; fewest wells have "
                f"{factor.shown(rarest)}",
            )


def line_faults(
    table: Table, definition: Definition, frame: pd.DataFrame, whole: Truths
) -> Iterator[Fault]:
    """Yield the wells that lie on a plate line which another stock feeds."""
    by = definition.plan.prepared_by
    if by == "well":
        return
    factors = [f for f in definition.factors if f.name in definition.stock_factors]
    fed: dict[int, tuple[tuple[object, ...], str]] = {}
    for row in np.flatnonzero(whole & (frame["well"] != "").to_numpy()).tolist():
        well = str(frame["well"][row])
        line = position(well, definition.plate)[0 if by == "row" else 1]
        stock = tuple(frame[f.name][row] for f in factors)
        other, first = fed.setdefault(line, (stock, well))
        if other != stock:
            shown = " and ".join(
                f"{f.name} {f.shown(v)}" for f, v in zip(factors, other, strict=True)
            )
            problem = f"lies on the {by} of {first}, which is fed {shown}; move it to another {by}"
            hint = f'study.toml, plan, prepared_by = "{by}"'
            yield table.fault(row, "well", problem, hint=hint)
