"""What a plan must keep to beyond its study: wells that are held, conditions declined, stocks."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.record.levels import beyond
from muntin.record.stock_levels import stock_levels
from muntin.record.stocks import Stock

Truths = NDArray[np.bool_]


@dataclass(frozen=True, kw_only=True, eq=False)
class Terms:
    """What one plan must keep to.

    held: rows that are in the plan already, in order (role, the factors as targets in raw units,
    each factor's _measured or NaN); only test, bridge and reference wells. declined: conditions
    (targets) that are not chosen. stocks: measured for this plate. budget_mg: protein for the
    bridging and test wells that are still to be chosen. fill: whether bridging wells are chosen.
    unfit: which rows of a frame of targets the stocks cannot make, and are therefore not chosen.
    """

    held: pd.DataFrame | None = None
    declined: frozenset[tuple[object, ...]] = frozenset()
    stocks: tuple[Stock, ...] = ()
    budget_mg: float | None = None
    fill: bool = True
    unfit: Callable[[pd.DataFrame], Truths] | None = None


@dataclass(frozen=True, eq=False)
class Weighed:
    """Candidates under weighing, Q rows each.

    targets: as they are set (raw units). actual: the values that the model uses. measured (Q,
    factors): where those were measured, not blended by the pipette. held: number of the candidate
    of each held row. barred (Q,): candidates that may be held but not chosen.
    """

    targets: pd.DataFrame
    actual: pd.DataFrame
    measured: Truths
    held: tuple[int, ...]
    barred: Truths


def weighed(definition: Definition, frame: pd.DataFrame, terms: Terms) -> Weighed:
    """Return the candidates of a frame (targets, raw units) and of the held rows, at the values
    that their stocks measured. Candidates that these carry a step beyond the range are barred.
    """
    of_stocks = stock_levels(definition, frame, terms.stocks)
    own, sure = of_stocks.values, of_stocks.sure
    count, names = len(frame), list(definition.factor_names)
    held: list[int] = []
    barred = np.zeros(count, dtype=bool)
    if terms.held is not None and len(terms.held):
        targets = terms.held[names].astype(frame.dtypes.to_dict())
        of_held = terms.held[[f"{n}_measured" for n in names]].to_numpy(dtype=float)
        of_stocks = stock_levels(definition, targets, terms.stocks)
        same = np.isclose(of_held, of_stocks.values, rtol=0.0, atol=1e-9, equal_nan=True)
        frame = pd.concat([frame, targets], ignore_index=True)
        own, sure = np.vstack([own, of_held]), np.vstack([sure, of_stocks.sure | ~same])
        held = _first_alike(frame, own, count)
        odd = ~same.all(axis=1)
        barred = np.r_[barred, odd | (np.array(held) != np.arange(count, len(frame)))]
    known = np.isfinite(own)
    actual = frame.copy()
    for i, factor in enumerate(definition.factors):
        if factor.continuous:
            x = frame[factor.name].to_numpy(dtype=float)
            actual[factor.name] = np.where(known[:, i], own[:, i], x)
            barred |= beyond(factor, actual[factor.name].to_numpy(dtype=float))
    if terms.declined:
        rows = frame.itertuples(index=False, name=None)
        barred |= np.array([row in terms.declined for row in rows], dtype=bool)
    if terms.unfit is not None:
        barred |= terms.unfit(frame)
    return Weighed(frame, actual, known & sure, tuple(held), barred)


def _first_alike(frame: pd.DataFrame, measured: NDArray[np.float64], count: int) -> list[int]:
    """Number of the first candidate with the targets and measured values of each row from `count`
    on, so that repeats are one candidate.
    """
    seen: dict[tuple[object, ...], int] = {}
    rows = zip(frame.itertuples(index=False, name=None), measured.tolist(), strict=True)
    numbers = []
    for number, (targets, values) in enumerate(rows):
        alike = (*targets, *(None if np.isnan(v) else round(v, 9) for v in values))
        numbers.append(seen.setdefault(alike, number))
    return numbers[count:]
