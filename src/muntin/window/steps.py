"""Bench steps of the factors with a range, choices held, and what is judged at them."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from itertools import product

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.window.largest import Axis

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Condition = dict[str, object]
Judge = Callable[[pd.DataFrame], Array]


@dataclass(frozen=True, eq=False)
class Steps:
    """The bench steps of F factors with a range; a condition of them is an index (F,).

    held: the choices of the other factors, by name. levels: the steps of each factor, raw unit.
    """

    definition: Definition
    held: Mapping[str, object]
    names: tuple[str, ...]
    levels: tuple[Array, ...]

    @classmethod
    def at(cls, definition: Definition, condition: Mapping[str, object]) -> Steps:
        """The steps with the choices of a condition."""
        ranged = [f for f in definition.factors if f.continuous]
        held = {f.name: condition[f.name] for f in definition.factors if not f.continuous}
        levels = tuple(f.levels().astype(float) for f in ranged)
        return cls(definition, held, tuple(f.name for f in ranged), levels)

    @property
    def counts(self) -> Index:
        """Steps of each factor (F,)."""
        return np.array([len(v) for v in self.levels], dtype=np.intp)

    def frame(self, index: Index) -> pd.DataFrame:
        """The conditions (n rows, raw units, all factors) of indices (n, F)."""
        columns: dict[str, object] = {
            name: [value] * len(index) for name, value in self.held.items()
        }
        for axis, name in enumerate(self.names):
            columns[name] = self.levels[axis][index[:, axis]]
        return pd.DataFrame(columns)[list(self.definition.factor_names)]

    def condition(self, index: Index) -> Condition:
        """The condition (raw units, all factors) of an index (F,)."""
        return condition_of(self.frame(index[None]))

    def index(self, frame: pd.DataFrame) -> Index:
        """The nearest steps (n, F) to conditions in raw units."""
        out = np.zeros((len(frame), len(self.names)), dtype=np.intp)
        for axis, (name, levels) in enumerate(zip(self.names, self.levels, strict=True)):
            x = frame[name].to_numpy(dtype=float)
            out[:, axis] = np.abs(levels[:, None] - x).argmin(axis=0)
        return out

    def coded(self, axis: int) -> Array:
        """Steps (k,) of one factor, 0 at the first and 1 at the last, on its scale."""
        levels = self.levels[axis]
        (factor,) = (f for f in self.definition.factors if f.name == self.names[axis])
        at = np.log(levels) if factor.scale == "log" else levels
        return np.asarray((at - at[0]) / (at[-1] - at[0]) if len(at) > 1 else np.zeros(1))

    def axis(self, axis: int, some: Index | None = None) -> Axis:
        """Where all steps of a factor lie, or some of them; one counts for an even share."""
        coded = self.coded(axis)
        nodes = coded if some is None else coded[some]
        return Axis(nodes, 1.0 / (len(coded) - 1) if len(coded) > 1 else 1.0)

    def of_grid(self, grid: pd.DataFrame) -> pd.DataFrame:
        """The rows of a grid that have the choices held."""
        rows = np.ones(len(grid), dtype=bool)
        for name, value in self.held.items():
            rows &= (grid[name] == value).to_numpy()
        return grid[rows]


@dataclass(frozen=True, eq=False)
class Judged:
    """The judged probability at bench steps, asked once of each; 0 where a limit is in the way.

    ask: probabilities (n,) at a frame of allowed conditions (raw units).
    """

    steps: Steps
    ask: Judge
    known: dict[tuple[int, ...], float] = field(default_factory=dict)

    def learn(self, grid: pd.DataFrame) -> None:
        """Take over the probabilities of a window's grid."""
        rows = self.steps.of_grid(grid)
        for at, p in zip(self.steps.index(rows).tolist(), rows["probability"], strict=True):
            self.known[tuple(at)] = float(p)

    def nodes(self) -> list[Index]:
        """Steps of each factor at which anything is known."""
        every = np.array([*self.known], dtype=np.intp).reshape(len(self.known), -1)
        return [np.unique(column) for column in every.T]

    def __call__(self, index: Index) -> Array:
        """Probabilities (n,) at indices (n, F)."""
        keys = [tuple(row) for row in index.tolist()]
        new = [key for key in dict.fromkeys(keys) if key not in self.known]
        if new:
            frame = self.steps.frame(np.array(new, dtype=np.intp).reshape(len(new), -1))
            allowed = np.asarray(self.steps.definition.allowed(frame), dtype=bool)
            p = np.zeros(len(new))
            if allowed.any():
                p[allowed] = self.ask(frame[allowed].reset_index(drop=True))
            self.known.update(zip(new, p.tolist(), strict=True))
        return np.array([self.known[key] for key in keys])

    def within(self, low: Index, high: Index) -> tuple[Index, Array]:
        """Indices (n, F) judged so far between low and high (F,), and their probabilities."""
        every = np.array([*self.known], dtype=np.intp).reshape(len(self.known), -1)
        rows = ((every >= low) & (every <= high)).all(axis=1)
        return every[rows], np.array([*self.known.values()])[rows]


def condition_of(frame: pd.DataFrame) -> Condition:
    """The first row of a frame of conditions."""
    return {str(name): value for name, value in frame.iloc[0].to_dict().items()}


def evenly(low: int, high: int, most: int, holding: int | None = None) -> Index:
    """At most so many steps (k,) from low to high, evenly, both among them; and `holding`, in place
    of the nearest where that is no end.
    """
    steps = np.round(np.linspace(low, high, min(most, high - low + 1))).astype(np.intp)
    if holding is None or not low <= holding <= high:
        return steps
    nearest = int(np.abs(steps - holding).argmin())
    if 0 < nearest < len(steps) - 1:
        steps[nearest] = holding
    return np.union1d(steps, holding)


def corners(low: Index, high: Index) -> Index:
    """The corners (2^F, F) of a box from low to high (F,)."""
    return np.array([*product(*zip(low, high, strict=True))], dtype=np.intp)


def whole(low: Index, high: Index) -> Index:
    """All indices (n, F) of a box from low to high (F,)."""
    return grid_of([np.arange(a, b + 1) for a, b in zip(low, high, strict=True)])


def grid_of(axes: Sequence[Index]) -> Index:
    """All combinations (n, F) of the steps of each factor; the last factor changes fastest."""
    if not axes:
        return np.zeros((1, 0), dtype=np.intp)
    return np.stack([g.ravel() for g in np.meshgrid(*axes, indexing="ij")], axis=1)
