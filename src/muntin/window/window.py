"""The predicted operating window (plate scale)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.window.limiting import Side

Array = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True, eq=False)
class Window:
    """Where the judged probability reaches the required one.

    grid: conditions (raw units) with p_mean, probability (the judged one) and inside. regular:
    whether they form a grid. share: of the range inside. wrong_share: expected share of the range
    that is called wrongly, mean of min(p, 1 - p) of p_mean. setpoint: the condition of highest
    probability, with it. ranges: factor ranges that hold together, all inside; None without a
    grid or a window. unsupported: reasons why the data do not support the window; empty if none.
    sides: which response gives way first beyond each side of the ranges.
    """

    grid: pd.DataFrame
    regular: bool
    share: float
    wrong_share: float
    setpoint: pd.Series
    ranges: dict[str, tuple[object, object]] | None
    unsupported: tuple[str, ...]
    sides: tuple[Side, ...] = ()


def judge_window(
    definition: Definition,
    grid: pd.DataFrame,
    regular: bool,
    p_mean: Array,
    judged: Array,
    unsupported: tuple[str, ...],
) -> Window:
    """The window from probabilities (n,) at the conditions of a grid."""
    inside = judged >= definition.required_probability
    table = grid.assign(p_mean=p_mean, probability=judged, inside=inside)
    best = _best(definition, grid, np.where(inside, judged, -1.0) if inside.any() else judged)
    ranges = None
    if regular and inside[best]:
        ranges = _ranges(definition, grid, inside, best)
    return Window(
        grid=table,
        regular=regular,
        share=float(inside.mean()),
        wrong_share=float(np.minimum(p_mean, 1.0 - p_mean).mean()),
        setpoint=table[[*definition.factor_names, "probability"]].iloc[best],
        ranges=ranges,
        unsupported=unsupported,
    )


def _best(definition: Definition, grid: pd.DataFrame, judged: Array) -> int:
    """Row of the highest probability; among rows that tie to half a per cent, which no model can
    tell apart, the most central of them.
    """
    tied = np.flatnonzero(judged >= judged.max() - 5e-3)
    numeric = [f.name for f in definition.factors if f.continuous]
    if not numeric:
        return int(tied[np.argmax(judged[tied])])
    values = grid.loc[tied, numeric].to_numpy(dtype=float)
    spans = np.array([f.span[1] - f.span[0] for f in definition.factors if f.continuous])
    away = ((values - values.mean(axis=0)) / spans) ** 2
    return int(tied[np.argmin(away.sum(axis=1))])


def _ranges(
    definition: Definition, grid: pd.DataFrame, inside: NDArray[np.bool_], best: int
) -> dict[str, tuple[object, object]]:
    """A box around row `best` grown one level at a time while every condition in it is inside."""
    names = definition.factor_names
    levels = [_levels(f.choices, grid[f.name]) for f in definition.factors]
    codes = np.stack(
        [
            grid[n].map({v: i for i, v in enumerate(ls)})
            for n, ls in zip(names, levels, strict=True)
        ],
        axis=1,
    ).astype(np.intp)
    low, high = codes[best].copy(), codes[best].copy()
    movable = [
        (i, side) for i, f in enumerate(definition.factors) if f.continuous for side in (-1, 1)
    ]
    while movable:
        grown = [
            (gain, move)
            for move in movable
            if (gain := _gain(codes, inside, low, high, move, len(levels[move[0]]))) > 0.0
        ]
        if not grown:
            break
        _, (i, side) = max(grown)
        if side < 0:
            low[i] -= 1
        else:
            high[i] += 1
        movable = [move for _, move in grown]
    return {n: (levels[i][low[i]], levels[i][high[i]]) for i, n in enumerate(names)}


def _levels(choices: tuple[str, ...] | None, column: pd.Series[Any]) -> list[object]:
    """The levels of a grid's factor in order: of the range, or of the choices as given."""
    found = set(column)
    return sorted(found) if choices is None else [c for c in choices if c in found]


def _gain(
    codes: NDArray[np.intp],
    inside: NDArray[np.bool_],
    low: NDArray[np.intp],
    high: NDArray[np.intp],
    move: tuple[int, int],
    levels: int,
) -> float:
    """How much of its side the box gains by one level there, as a share; 0 if it may not."""
    i, side = move
    new = low[i] - 1 if side < 0 else high[i] + 1
    if not 0 <= new < levels:
        return 0.0
    slab = np.ones(len(codes), dtype=bool)
    for j in range(codes.shape[1]):
        slab &= codes[:, j] == new if j == i else (codes[:, j] >= low[j]) & (codes[:, j] <= high[j])
    wanted = np.prod([high[j] - low[j] + 1 for j in range(codes.shape[1]) if j != i])
    if slab.sum() < wanted or not inside[slab].all():
        return 0.0
    # Widths in shares of the range, so that growth is balanced between the factors.
    return 1.0 / (high[i] - low[i] + 1) + 1e-3 / levels
