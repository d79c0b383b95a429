"""Stocks: what a prepared stock measured, plate by plate."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import NamedTuple

import numpy as np

from muntin.record.bottles import alike, bottle_examples, named_bottle, tells_bottles
from muntin.record.cells import numbers
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.faults import Fault, Findings, did_you_mean, nearest, number
from muntin.record.notes import not_run
from muntin.record.tables import Table, missing_column, read_table, table_files

COLUMNS = ("factor", "target", "measured", "bottle", "lot", "by")
# Shares of the range, or of what a bottle is to hold, if that is more: so far off is worth a word,
# and so far off a slip of a digit.
_FAR, _TOO_FAR = 0.1, 0.5


class Stock(NamedTuple):
    """One stock: factor, target and measured value (raw unit), its address, and what stands on the
    bottle of [bench] that it is, "" for the liquid of every well with that target.
    """

    factor: str
    target: float
    measured: float
    file: str
    where: str
    bottle: str = ""


def read_stocks(
    folder: Path, definition: Definition, plates: Sequence[str], found: Findings
) -> dict[str, list[Stock]]:
    """Return the measured stocks of each plate; those of planned ones are checked, too."""
    stocks = {}
    for plate, path in table_files(folder / "stocks", found):
        file = f"stocks/{path.name}"
        table = read_table(path, file, COLUMNS, found)
        if plate not in plates:
            not_run(folder, plate, file, list(plates), found)
            if table is not None:
                _stocks(table, definition, found)
        elif table is not None:
            stocks[plate] = _stocks(table, definition, found)
    return stocks


def planned_stocks(
    folder: Path, definition: Definition, plate: str, found: Findings
) -> tuple[Stock, ...]:
    """Return the stocks measured for a plate that is planned, not run; none where no file is."""
    passed_over = Findings()
    for stem, path in table_files(folder / "stocks", passed_over):
        table = read_table(path, f"stocks/{path.name}", COLUMNS, found) if stem == plate else None
        if table is not None:
            return tuple(_stocks(table, definition, found))
    return ()


def _stocks(table: Table, definition: Definition, found: Findings) -> list[Stock]:
    lacking = [name for name in COLUMNS[:3] if name not in table.columns]
    found.faults.extend(missing_column(table, name) for name in lacking)
    there = table.columns
    meant = [n for n in there if n not in COLUMNS and nearest(n, COLUMNS) == "bottle"]
    if meant and "bottle" not in there:
        problem, hint = "resembles bottle, which this table lacks", "rename the column"
        found.faults.append(Fault(file=table.file, column=meant[0], problem=problem, hint=hint))
    if lacking or (meant and "bottle" not in there):
        return []
    factors = {factor.name: factor for factor in definition.factors}
    targets = numbers(table, "target", found.faults)
    measured = numbers(table, "measured", found.faults)
    stocks: list[Stock] = []
    for row, name in enumerate(table.cells("factor")):
        if not _names_stock(table, row, name, definition.factors, found):
            continue
        if not table.cells("target")[row]:
            found.faults.append(table.fault(row, "target", "a stock needs it"))
        at = table.file, table.where[row]
        stock = Stock(name, float(targets[row]), float(measured[row]), *at)
        if table.cells("bottle")[row] and tells_bottles(definition):
            stock = _bottled(table, row, definition, factors[name], stock, found)
        found.faults.extend(_again(table, row, factors[name], stock, stocks))
        if np.isfinite(stock.measured):
            stocks.append(stock)
    return stocks


def _bottled(
    table: Table, row: int, definition: Definition, factor: Factor, stock: Stock, found: Findings
) -> Stock:
    """The stock as the bottle that its row names."""
    name = table.cells("bottle")[row]
    bottle = named_bottle(definition, name, {factor.name: stock.target})
    if bottle is None:
        found.faults.append(_no_bottle(table, row, definition))
        return stock
    holds = bottle.holds.get(factor.name)
    if holds is None:
        problem = f"holds no {factor.name}"
        found.faults.append(table.fault(row, "bottle", problem, hint="study.toml, bench, stocks"))
    elif np.isfinite(stock.target) and not alike(factor, holds, stock.target):
        allowed = f"{factor.shown(holds)} {factor.unit}".rstrip()
        problem, hint = f"is not what {bottle.name} holds:", "study.toml, bench, stocks"
        found.faults.append(table.fault(row, "target", problem, allowed, hint))
    low, high, _ = factor.span
    size = max(high - low, abs(stock.target))
    off = abs(stock.measured - stock.target)
    if off > _TOO_FAR * size * (1.0 + 1e-9):
        most = _TOO_FAR * size
        ends = f"{number(stock.target - most)} to {number(stock.target + most)} {factor.unit}"
        problem = "lies too far from the target for a bottle of it, outside"
        found.faults.append(table.fault(row, "measured", problem, ends.rstrip()))
    elif off > _FAR * size * (1.0 + 1e-9):
        found.notices.append(
            f"{stock.file}, {stock.where}: {bottle.name} measured {number(stock.measured)}, far "
            f"from its target of {factor.name}, {number(stock.target)}; it is used as it stands"
        )
    return stock._replace(bottle=bottle.name)


def _no_bottle(table: Table, row: int, definition: Definition) -> Fault:
    names = bottle_examples(definition)
    if not names:
        return table.fault(row, "bottle", "names a bottle, but study.toml, bench, has no stocks")
    like = nearest(table.cells("bottle")[row], names) or names[0]
    problem, hint = "is not a bottle of study.toml, [bench]", f"one is called {like}"
    return table.fault(row, "bottle", problem, hint=hint)


def _again(
    table: Table, row: int, factor: Factor, stock: Stock, earlier: Iterable[Stock]
) -> list[Fault]:
    """A second value for what has one; bottles of one target may differ."""
    for other in earlier:
        alike_target = other.factor == stock.factor and alike(factor, other.target, stock.target)
        if alike_target and (not stock.bottle or stock.bottle == other.bottle or not other.bottle):
            problem = f"is already the target of another stock of {factor.name} on this plate"
            hint = "column bottle tells bottles apart"
            if stock.bottle and other.bottle:
                problem = f"of {stock.bottle} has a row of its own already"
                hint = f"{factor.name} of a bottle has one value"
            return [table.fault(row, "target", problem, hint=hint)]
    return []


def _names_stock(
    table: Table, row: int, name: str, factors: Sequence[Factor], found: Findings
) -> bool:
    ranged = [factor.name for factor in factors if factor.continuous]
    if name in ranged:
        return True
    if name in [factor.name for factor in factors]:
        problem = "has choices; only a factor with a range has measured stocks"
        found.faults.append(table.fault(row, "factor", problem))
    else:
        hint = did_you_mean(name, ranged) if name and ranged else ""
        found.faults.append(table.fault(row, "factor", "is not a factor", hint=hint))
    return False
