"""Levels that one plate may hold of the factors with `per_plate`."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition


@dataclass
class Levels:
    """The distinct levels that a plan uses of each factor with `per_plate`.

    frame: the candidates (targets, raw units). Unless a set of levels is kept to, a new level keeps
    its distance from those in use, a third of what even spreading would give: two stocks a bench
    step apart tell hardly more than one.
    """

    definition: Definition
    frame: pd.DataFrame

    def __post_init__(self) -> None:
        """Start with no level in use."""
        limited = [f for f in self.definition.factors if f.per_plate is not None]
        self._most = {f.name: f.per_plate or 0 for f in limited}
        self._used: dict[str, set[Any]] = {name: set() for name in self._most}
        self._sets: dict[str, frozenset[Any]] = {}

    @property
    def used(self) -> Mapping[str, frozenset[Any]]:
        """The levels in use of each limited factor."""
        return {name: frozenset(levels) for name, levels in self._used.items()}

    @property
    def most(self) -> Mapping[str, int]:
        """How many levels a plate may hold of each limited factor."""
        return self._most

    def over(self, frame: pd.DataFrame) -> Levels:
        """The same levels in use and kept to, over other candidates."""
        levels = Levels(self.definition, frame)
        levels._most = dict(self._most)
        levels._used = {name: set(used) for name, used in self._used.items()}
        levels._sets = dict(self._sets)
        return levels

    def use(self, candidate: int) -> None:
        """Count the levels of a candidate in the plan."""
        for name, used in self._used.items():
            used.add(self.frame[name].iloc[candidate])

    def keep_to(self, name: str, levels: Collection[Any] | None) -> None:
        """Take no other levels of a limited factor than these and those in use; None lifts it.

        Raises ValueError where they are more than a plate may hold.
        """
        self._sets.pop(name, None)
        if levels is not None:
            kept = frozenset(levels) | self._used[name]
            if len(kept) > self._most[name]:
                raise ValueError(f"{len(kept)} levels of {name}, {self._most[name]} are allowed")
            self._sets[name] = kept

    def set_free(self, name: str) -> None:
        """Count the levels of a factor no longer."""
        for of in (self._most, self._used, self._sets):
            of.pop(name, None)

    def open(self) -> NDArray[np.bool_]:
        """Which candidates need no level more than the plate may have."""
        keep = np.ones(len(self.frame), dtype=bool)
        for factor in self.definition.factors:
            if factor.name in self._sets:
                keep &= self.frame[factor.name].isin(self._sets[factor.name]).to_numpy()
                continue
            used = self._used.get(factor.name)
            if not used:
                continue
            again = self.frame[factor.name].isin(used).to_numpy()
            if len(used) >= self._most[factor.name]:
                keep &= again
            elif factor.continuous:
                levels = factor.plan_levels()
                apart = (levels[-1] - levels[0]) / (3.0 * self._most[factor.name])
                x = self.frame[factor.name].to_numpy(dtype=float)
                away = np.abs(x[:, None] - np.array(sorted(used), dtype=float)).min(axis=1)
                keep &= again | (away >= apart)
        return keep

    def stocks(self) -> NDArray[np.intp]:
        """Number (Q,) of the combination of limited levels that each candidate needs."""
        if not self._most:
            return np.zeros(len(self.frame), dtype=np.intp)
        groups = self.frame.groupby([*self._most], sort=False, dropna=False).ngroup()
        return np.asarray(groups.to_numpy(), dtype=np.intp)

    def with_one(self, candidates: Iterable[int]) -> Levels:
        """These levels with those of some candidates in use besides."""
        levels = self.over(self.frame)
        for candidate in candidates:
            levels.use(candidate)
        return levels
