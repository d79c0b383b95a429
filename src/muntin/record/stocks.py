"""Stocks: what a prepared stock measured, plate by plate."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import NamedTuple

import numpy as np

from muntin.record.cells import numbers
from muntin.record.factors import Factor
from muntin.record.faults import Findings, did_you_mean, number
from muntin.record.keys import Floats
from muntin.record.notes import not_run
from muntin.record.tables import Table, missing_column, read_table, table_files

COLUMNS = ("factor", "target", "measured", "lot", "by")


class Stock(NamedTuple):
    """One stock: factor, target and measured value (raw unit), and its address."""

    factor: str
    target: float
    measured: float
    file: str
    where: str


def read_stocks(
    folder: Path, factors: Sequence[Factor], plates: Sequence[str], found: Findings
) -> dict[str, list[Stock]]:
    """Return the measured stocks of each plate; those of planned ones are checked, too."""
    by_name = {factor.name: factor for factor in factors}
    stocks = {}
    for plate, path in table_files(folder / "stocks", found):
        file = f"stocks/{path.name}"
        table = read_table(path, file, COLUMNS, found)
        if plate not in plates:
            not_run(folder, plate, file, list(plates), found)
            if table is not None:
                _stocks(table, by_name, found)
        elif table is not None:
            stocks[plate] = _stocks(table, by_name, found)
    return stocks


def planned_stocks(
    folder: Path, factors: Sequence[Factor], plate: str, found: Findings
) -> tuple[Stock, ...]:
    """Return the stocks measured for a plate that is planned, not run; none where no file is."""
    by_name = {factor.name: factor for factor in factors}
    passed_over = Findings()
    for stem, path in table_files(folder / "stocks", passed_over):
        table = read_table(path, f"stocks/{path.name}", COLUMNS, found) if stem == plate else None
        if table is not None:
            return tuple(_stocks(table, by_name, found))
    return ()


def _stocks(table: Table, factors: Mapping[str, Factor], found: Findings) -> list[Stock]:
    lacking = [name for name in COLUMNS[:3] if name not in table.columns]
    found.faults.extend(missing_column(table, name) for name in lacking)
    if lacking:
        return []
    targets = numbers(table, "target", found.faults)
    measured = numbers(table, "measured", found.faults)
    stocks: list[Stock] = []
    for row, name in enumerate(table.cells("factor")):
        if not _names_stock(table, row, name, factors, found):
            continue
        if not table.cells("target")[row]:
            found.faults.append(table.fault(row, "target", "a stock needs it"))
        stock = Stock(name, float(targets[row]), float(measured[row]), table.file, table.where[row])
        if any(
            same_target(factors[name], stock.target, s.target) for s in stocks if s.factor == name
        ):
            problem = f"is already the target of another stock of {name} on this plate"
            found.faults.append(table.fault(row, "target", problem))
        if np.isfinite(stock.measured):
            stocks.append(stock)
    return stocks


def _names_stock(
    table: Table, row: int, name: str, factors: Mapping[str, Factor], found: Findings
) -> bool:
    ranged = [factor.name for factor in factors.values() if factor.continuous]
    if name in ranged:
        return True
    if name in factors:
        problem = "has choices; only a factor with a range has measured stocks"
        found.faults.append(table.fault(row, "factor", problem))
    else:
        hint = did_you_mean(name, ranged) if name and ranged else ""
        found.faults.append(table.fault(row, "factor", "is not a factor", hint=hint))
    return False


def same_target(factor: Factor, one: float, other: float) -> bool:
    """Whether two set values (raw unit) are the same but for rounding."""
    return bool(abs(one - other) <= 1e-6 * factor.span[2])


def stock_values(
    factor: Factor, targets: Floats, stocks: Sequence[Stock], plate: str, found: Findings
) -> Floats:
    """Return the measured value of the stock of each well, shape (wells,), NaN where none is."""
    values = np.full(len(targets), np.nan)
    for stock in stocks:
        if stock.factor != factor.name:
            continue
        used = np.abs(targets - stock.target) <= 1e-6 * factor.span[2]
        values[used] = stock.measured
        if not used.any():
            found.notices.append(
                f"{stock.file}, {stock.where}: no well of {plate} has {factor.name} "
                f"{number(stock.target)}; the stock is not used"
            )
    return values
