"""Levels of a factor on a plate: targets, measured values, choices."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from muntin.record.cells import numbers
from muntin.record.factors import Factor
from muntin.record.faults import Fault, Findings, counted, did_you_mean, listed, number
from muntin.record.keys import Floats, Truths
from muntin.record.stocks import Stock
from muntin.record.tables import Table


def read_choices(table: Table, factor: Factor, needed: Truths, found: Findings) -> list[str]:
    """Return the choices in a column, one a row; rows that are not `needed` may be empty."""
    choices = factor.choices or ()
    by_fold = {choice.casefold(): choice for choice in choices}
    chosen = []
    for row, cell in enumerate(table.cells(factor.name)):
        choice = cell if cell in choices else by_fold.get(cell.casefold(), cell)
        chosen.append(choice)
        if not cell and needed[row]:
            found.faults.append(table.fault(row, factor.name, "the well needs its choice"))
        elif cell and choice not in choices:
            hint = did_you_mean(cell, choices)
            found.faults.append(table.fault(row, factor.name, "is not a choice", hint=hint))
    return chosen


def read_targets(table: Table, factor: Factor, needed: Truths, found: Findings) -> Floats:
    """Return the targets of a factor (raw unit), shape (rows,), NaN where none is given.

    Only rows that are `needed` must hold one, inside the range.
    """
    targets = numbers(table, factor.name, found.faults)
    _check_targets(table, factor, targets, needed, found)
    return targets


def read_levels(
    table: Table,
    factor: Factor,
    needed: Truths,
    targets: Floats,
    of_stocks: tuple[Floats, Truths, Truths],
    found: Findings,
) -> tuple[Floats, Truths]:
    """Return the values that the model uses (raw unit) and whether a value was measured, shape
    (rows,) each.

    A value is the well's measured one, else that of its stocks (beside it which of those are sure
    and which reckoned from bottles), else the target. Only rows that are `needed` must lie inside
    the range.
    """
    measured = numbers(table, f"{factor.name}_measured", found.faults)
    _check_measured(table, factor, measured, needed, found)
    own = np.isfinite(measured)
    level, sure, bottled = of_stocks
    told = np.where(own, measured, level)
    _check_blended(table, factor, np.where(bottled & ~own, level, np.nan), needed, found)
    found.notices.extend(_off_target(table, factor, targets, told, needed))
    known = np.isfinite(told)
    return np.where(known, told, targets), own | (known & sure)


def _check_targets(
    table: Table, factor: Factor, targets: Floats, needed: Truths, found: Findings
) -> None:
    low, high, step = factor.span
    rule = f"study.toml, factors, {factor.name}"
    cells = table.cells(factor.name)
    slack = 1e-6 * step
    outside = (targets < low - slack) | (targets > high + slack)
    for row in np.flatnonzero(needed).tolist():
        if outside[row]:
            found.faults.append(_outside(table, row, factor.name, factor.range_text, rule))
        elif not cells[row]:
            found.faults.append(table.fault(row, factor.name, "the well needs its value"))


def _outside(table: Table, row: int, column: str, allowed: str, rule: str) -> Fault:
    return table.fault(row, column, "lies outside", allowed, rule)


def _measured_range(factor: Factor) -> tuple[float, float]:
    low, high, step = factor.span
    floor = low - step
    return (max(floor, np.nextafter(0, 1)) if factor.scale == "log" else floor), high + step


def _measured_text(factor: Factor) -> str:
    low, high, step = factor.span
    floor = "above 0" if factor.scale == "log" and low <= step else number(low - step)
    return f"{floor} to {number(high + step)} {factor.unit}".rstrip() + ", the range and a step"


def _check_measured(
    table: Table, factor: Factor, measured: Floats, needed: Truths, found: Findings
) -> None:
    rule = f"study.toml, factors, {factor.name}"
    for row in np.flatnonzero(needed & beyond(factor, measured)).tolist():
        column = f"{factor.name}_measured"
        found.faults.append(_outside(table, row, column, _measured_text(factor), rule))


def _check_blended(
    table: Table, factor: Factor, blended: Floats, needed: Truths, found: Findings
) -> None:
    rule = "what its bottles measured, in stocks/"
    for row in np.flatnonzero(needed & beyond(factor, blended)).tolist():
        problem = f"comes to {number(float(f'{blended[row]:.6g}'))} in the well, outside"
        found.faults.append(table.fault(row, factor.name, problem, _measured_text(factor), rule))


def beyond(factor: Factor, values: Floats) -> Truths:
    """Return which values (raw unit) lie more than a step outside the range; NaN do not."""
    low, high = _measured_range(factor)
    slack = 1e-9 * (high - low)
    return np.asarray((values < low - slack) | (values > high + slack), dtype=bool)


def check_stocks(factor: Factor, stocks: Sequence[Stock], found: Findings) -> None:
    """Report the stocks of a factor that measured more than a step outside its range; what bottles
    hold that wells are blended from may lie anywhere.
    """
    for stock in stocks:
        if stock.factor != factor.name or stock.bottle:
            continue
        if beyond(factor, np.array([stock.measured]))[0]:
            found.faults.append(
                Fault(
                    file=stock.file,
                    where=stock.where,
                    column="measured",
                    value=number(stock.measured),
                    problem="lies outside",
                    allowed=_measured_text(factor),
                    hint=f"study.toml, factors, {factor.name}; if it is a bottle that wells are "
                    "blended from, name it in the column bottle",
                )
            )


def _off_target(
    table: Table, factor: Factor, targets: Floats, measured: Floats, needed: Truths
) -> list[str]:
    half = factor.span[2] / 2
    off = needed & (np.abs(measured - targets) > half * (1 + 1e-9))
    if not off.any():
        return []
    wells = [table.cells("well")[row] for row in np.flatnonzero(off)]
    unit = f" {factor.unit}" if factor.unit else ""
    return [
        f"{table.file}: {factor.name} measured more than half a step ({number(half)}{unit}) off "
        f"its target in {counted(len(wells), 'well')} ({listed(wells)}); the measured values are "
        "used"
    ]
