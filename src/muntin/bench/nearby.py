"""The nearest condition that works, where one does not."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from itertools import product

import pandas as pd

from muntin.bench.recipe import Condition
from muntin.record.definition import Definition
from muntin.record.factors import Factor

_MOST = 20_000
Value = float | str


def nearest_that(
    works: Callable[[Condition], bool],
    definition: Definition,
    condition: Condition,
    moved: Iterable[str],
    bottled: Iterable[str] = (),
) -> dict[str, Value] | None:
    """Return the nearest condition (raw units) that new plans may use and that works.

    Distances are shares of the ranges, choices are one apart. Factors that are not among those
    moved stay as they are; a condition with fewer changes of the factors that come with a bottle is
    nearer. None where none works among the nearest 20,000.
    """
    factors = [factor for factor in definition.factors if factor.name in {*moved}]
    if not factors:
        return None
    each = max(2, int(_MOST ** (1 / len(factors))))
    levels = [_nearest_levels(factor, condition[factor.name], each) for factor in factors]
    names = [factor.name for factor in factors]
    rows = [{**condition, **dict(zip(names, v, strict=True))} for v in product(*levels)]
    frame = pd.DataFrame(rows)[list(definition.factor_names)]
    may = definition.allowed(frame) & ~definition.forbids(frame)
    tied = {*bottled}

    def away(row: Mapping[str, Value]) -> tuple[int, float]:
        off = {f.name: _distance(f, row[f.name], condition[f.name]) for f in factors}
        return sum(off[name] > 0 for name in off if name in tied), sum(d * d for d in off.values())

    near = sorted((row for row, ok in zip(rows, may, strict=True) if ok), key=away)
    return next((row for row in near if works(row)), None)


def _distance(factor: Factor, one: Value, other: Value) -> float:
    if isinstance(one, str) or isinstance(other, str):
        return float(one != other)
    low, high, _ = factor.span
    return abs(one - other) / (high - low)


def _nearest_levels(factor: Factor, value: Value, most: int) -> list[Value]:
    levels: list[Value] = factor.plan_levels().tolist()
    return sorted(levels, key=lambda level: _distance(factor, level, value))[:most]
