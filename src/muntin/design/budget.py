"""Protein that the wells to be chosen may take together, where the load is a factor."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.design.levels import Levels

Array = NDArray[np.float64]
Truths = NDArray[np.bool_]
_SLACK = 1e-9


class ProteinShortError(ValueError):
    """The protein does not suffice for the wells asked for; `enough` of them it would feed."""

    def __init__(self, enough: int) -> None:
        self.enough = enough
        super().__init__(f"protein for {enough} wells")


@dataclass
class Budget:
    """What is left of the protein, and what a well at each candidate takes.

    mg (Q,): of one well at each candidate. left: mg for all wells that are still to be chosen.
    """

    mg: Array
    left: float

    def spend(self, candidate: int) -> None:
        """Take the protein of a well."""
        self.left -= float(self.mg[candidate])

    def require(self, open_wells: Truths, wells: int) -> None:
        """Raise ProteinShortError unless the cheapest open candidates can fill so many wells."""
        cheapest = float(self.mg[open_wells].min()) if open_wells.any() else np.inf
        if self.left < -_SLACK or cheapest * wells > self.left + _SLACK:
            raise ProteinShortError(int(max(0.0, self.left + _SLACK) / cheapest))

    def affordable(
        self, levels: Levels, open_wells: Truths, wells: int, block: int, taken: Sequence[int]
    ) -> Truths:
        """Which open candidates leave enough for the rest of the wells, whatever they are.

        wells: still to be chosen, `block` of them at the next candidate. The rest can always be
        filled by repeats of the cheapest candidate that stays open, so that a choice made by this
        rule never ends in a dead end; a rest too small for a block repeats one already taken.
        """
        rest = wells - block
        if not open_wells.any() or self.mg[open_wells].max() * wells <= self.left + _SLACK:
            return open_wells
        floor = np.minimum(self.mg, min((self.mg[c] for c in taken), default=np.inf))
        if rest == 0 or rest >= block:
            floor = self._floors(levels, open_wells)
        enough = self.mg * block + floor * rest <= self.left + _SLACK
        return np.asarray(open_wells & enough, dtype=bool)

    def _floors(self, levels: Levels, open_wells: Truths) -> Array:
        """Least protein (Q,) of a candidate that stays open once each candidate is taken."""
        stocks = levels.stocks()
        floors = self.mg.copy()
        for stock in np.unique(stocks[open_wells]):
            first = int(np.flatnonzero(open_wells & (stocks == stock))[0])
            left_open = open_wells & levels.with_one([first]).open()
            floors[stocks == stock] = self.mg[left_open].min()
        return floors
