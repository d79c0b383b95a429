"""Where columns are run: the set point, and edges of the window that lie far apart."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.column_plan import Place
from muntin.record.definition import Definition
from muntin.window.coded import code
from muntin.window.window import Window

Array = NDArray[np.float64]
Truths = NDArray[np.bool_]
# Without a grid there are no neighbours: the part of the window of lowest probability is its edge.
_LOWEST = 0.1


class Spot(NamedTuple):
    """A condition to run: what for, values of the factors, its judged probability."""

    place: Place
    condition: dict[str, float | str]
    probability: float


def spots(definition: Definition, window: Window) -> list[Spot]:
    """Return the set point and two edges of a window that has one.

    Edges are conditions just inside: a neighbour on the grid, in one factor, lies in the tested
    range and outside the window. Of them the two that lie farthest apart in coded factors are
    taken, the less probable first. Where the window has fewer than two besides the set point, the
    far side of the window stands in. A column has one resin: edges
    keep the choices of the set point. Conditions that new plans must not use are passed over.
    """
    grid = window.grid
    choices = [f.name for f in definition.factors if not f.continuous]
    alike = np.ones(len(grid), dtype=bool)
    for name in choices:
        alike &= (grid[name] == window.setpoint[name]).to_numpy()
    centre = _row_of(definition, grid, window.setpoint)
    open_ = alike & grid["inside"].to_numpy(dtype=bool) & ~definition.forbids(grid)
    open_[centre] = False
    X = code(definition, grid)
    edge = open_ & _at_edge(definition, window)
    chosen = _far_apart(X, np.flatnonzero(edge))
    if len(chosen) < 2:
        open_[chosen] = False
        chosen += _far_side(X, chosen, np.flatnonzero(open_))
    chosen.sort(key=lambda row: float(grid["probability"].iloc[row]))
    told = [_spot(definition, grid, "set point", centre)]
    return told + [
        _spot(definition, grid, "edge" if edge[row] else "far side", row) for row in chosen
    ]


def _row_of(definition: Definition, grid: pd.DataFrame, setpoint: pd.Series) -> int:
    same = np.ones(len(grid), dtype=bool)
    for name in definition.factor_names:
        same &= (grid[name] == setpoint[name]).to_numpy()
    return int(np.flatnonzero(same)[0])


def _spot(definition: Definition, grid: pd.DataFrame, place: Place, row: int) -> Spot:
    values = grid.iloc[row]
    condition = {
        f.name: float(values[f.name]) if f.continuous else str(values[f.name])
        for f in definition.factors
    }
    return Spot(place, condition, float(values["probability"]))


def _at_edge(definition: Definition, window: Window) -> Truths:
    """Which conditions of the grid have a neighbour in one factor that lies outside the window."""
    grid, inside = window.grid, window.grid["inside"].to_numpy(dtype=bool)
    if not window.regular:
        p = grid["probability"].to_numpy()
        most = np.quantile(p[inside], _LOWEST) if inside.any() else 0.0
        return inside & (p <= most)
    codes = {
        f.name: np.unique(grid[f.name], return_inverse=True)[1]
        for f in definition.factors
        if f.continuous
    }
    frame = grid.assign(**codes)
    names = list(definition.factor_names)
    index = pd.MultiIndex.from_frame(frame[names])
    state = pd.Series(inside, index=index)
    edge = np.zeros(len(grid), dtype=bool)
    for name in codes:
        for step in (-1, 1):
            moved = frame[names].assign(**{name: frame[name] + step})
            next_to = state.reindex(pd.MultiIndex.from_frame(moved))
            edge |= (next_to == False).to_numpy(dtype=bool)  # noqa: E712 - missing is not outside
    return edge & inside


def _far_apart(X: Array, rows: NDArray[np.intp]) -> list[int]:
    """The two rows that lie farthest apart; one or none where there are no more."""
    if len(rows) < 2:
        return [int(row) for row in rows]
    away = ((X[rows][:, None, :] - X[rows][None, :, :]) ** 2).sum(-1)
    i, j = np.unravel_index(int(away.argmax()), away.shape)
    return [int(rows[i]), int(rows[j])]


def _far_side(X: Array, edges: list[int], rows: NDArray[np.intp]) -> list[int]:
    """Rows that make up for edges that are not there: the one farthest from the edge, or, where
    there is none, the two that lie farthest apart.
    """
    if not edges or not len(rows):
        return _far_apart(X, rows)
    return [int(rows[int(((X[rows] - X[edges[0]]) ** 2).sum(-1).argmax())])]
