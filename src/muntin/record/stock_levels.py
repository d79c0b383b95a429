"""Levels that stocks give the wells: of their own, or blended from bottles that were measured."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from muntin.record.bottles import Value, alike, bottles_for, held_part
from muntin.record.definition import Definition
from muntin.record.keys import Floats, Truths
from muntin.record.mixes import Mixes, mixes_of, poured
from muntin.record.stocks import Stock

_TINY = 1e-9


@dataclass(frozen=True, eq=False)
class StockLevels:
    """What the stocks of a plate make of its rows.

    values (rows, factors): the level (raw unit), NaN where the stocks tell nothing beyond the
    target. sure (rows, factors): whether it is that of a liquid as it was measured, so that the
    pipette has no part in it. bottled (rows, factors): whether it was reckoned from bottles. used
    (rows, stocks): which stocks a row's levels rest on. amiss: by factor, the rows that stay at
    their target although a bottle for them was measured: by bottle of which that is not known, or
    "" where no blend of the bottles makes the row. idle: numbers of the stocks whose bottle goes
    into one of those.
    """

    values: Floats
    sure: Truths
    bottled: Truths
    used: Truths
    amiss: dict[str, dict[str, set[int]]]
    idle: set[int]

    def of(self, factor: int) -> tuple[Floats, Truths, Truths]:
        """Return values, sure and bottled of one factor, by its number."""
        return self.values[:, factor], self.sure[:, factor], self.bottled[:, factor]


def stock_levels(
    definition: Definition, targets: pd.DataFrame, stocks: Sequence[Stock]
) -> StockLevels:
    """Return what measured stocks make of rows of targets (a column a factor, raw units).

    A stock without a bottle is the liquid of the rows with its target. A bottle gives the rows
    blended from it their share of what it measured; of the pH, and of what else the bottles of one
    liquid have in common, a row has their mean by volume. Rows that lack a level of a factor which
    the liquid sets have none from bottles.
    """
    shape = len(targets), len(definition.factors)
    made = StockLevels(
        values=np.full(shape, np.nan),
        sure=np.zeros(shape, dtype=bool),
        bottled=np.zeros(shape, dtype=bool),
        used=np.zeros((len(targets), len(stocks)), dtype=bool),
        amiss={},
        idle=set(),
    )
    if any(stock.bottle for stock in stocks):
        for condition, rows in _conditions(definition, targets):
            _blend(definition, condition, rows, stocks, made)
    for i, factor in enumerate(definition.factors):
        for j, stock in enumerate(stocks):
            if stock.factor == factor.name and not stock.bottle:
                levels = targets[factor.name].tolist()
                own = np.array([alike(factor, x, stock.target) for x in levels], dtype=bool)
                made.values[own, i] = stock.measured
                made.sure[own, i] = True
                made.bottled[own, i] = False
                made.used[own, j] = True
    return made


def _conditions(
    definition: Definition, targets: pd.DataFrame
) -> Iterator[tuple[dict[str, Value], list[int]]]:
    """The distinct liquids of some rows, with those rows."""
    rows: dict[tuple[Any, ...], list[int]] = {}
    names = [*held_part(definition, dict.fromkeys(definition.factor_names, 0.0))]
    whole = targets[names].notna().all(axis=1).to_numpy()
    for row, values in enumerate(targets[names].itertuples(index=False, name=None)):
        if whole[row]:
            rows.setdefault(values, []).append(row)
    for values, alike_rows in rows.items():
        yield dict(zip(names, values, strict=True)), alike_rows


def _blend(
    definition: Definition,
    condition: Mapping[str, Value],
    rows: list[int],
    stocks: Sequence[Stock],
    made: StockLevels,
) -> None:
    """Set the levels of the rows of one liquid that bottles tell."""
    names = {bottle.name for bottle in bottles_for(definition, condition)}
    told = {(s.bottle, s.factor): j for j, s in enumerate(stocks) if s.bottle in names}
    if not told:
        return
    mixes = mixes_of(definition, condition)
    shares = poured(definition, mixes)
    if shares is None:
        made.idle.update(told.values())
        for _, factor_name in told:
            made.amiss.setdefault(factor_name, {}).setdefault("", set()).update(rows)
        return
    for i, factor in enumerate(definition.factors):
        parts, unknown = _parts(mixes, shares, factor.name, told)
        made.idle.update(parts if unknown else ())
        for lacking in unknown if parts else ():
            made.amiss.setdefault(factor.name, {}).setdefault(lacking, set()).update(rows)
        if parts and not unknown:
            common = factor.name in mixes.tied
            whole = sum(parts.values()) if common else 1.0
            off = sum(s * (stocks[j].measured - stocks[j].target) for j, s in parts.items()) / whole
            sure = common or max(parts.values()) > 1.0 - _TINY
            made.used[np.ix_(rows, [*parts])] = True
            made.sure[rows, i], made.bottled[rows, i] = sure, True
            if sure or abs(off) > _TINY * factor.span[2]:
                made.values[rows, i] = float(condition[factor.name]) + off


def _parts(
    mixes: Mixes, shares: Floats, name: str, told: Mapping[tuple[str, str], int]
) -> tuple[dict[int, float], list[str]]:
    """The shares of a mix by the stocks that tell what they bring of a factor, and the bottles of
    which that is not known.
    """
    parts, unknown = dict[int, float](), []
    for bottle, share in zip(mixes.bottles, shares.tolist(), strict=True):
        if share > 0 and (bottle.name, name) in told:
            parts[told[bottle.name, name]] = share
        elif share > 0 and bottle.holds.get(name):
            unknown.append(bottle.name)
    return parts, unknown
