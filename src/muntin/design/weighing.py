"""Candidates under weighing: what each would tell, as wells are taken into the plan."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.best import BestCriterion
from muntin.design.budget import Budget
from muntin.design.candidates import RunCondition
from muntin.design.edge import EdgeCriterion, LazyGreedy
from muntin.design.forecast import Tails, wrong_share
from muntin.design.level_sets import Scout, choose_level_sets
from muntin.design.levels import Levels
from muntin.design.outlook import Outlook
from muntin.design.terms import Weighed
from muntin.record.definition import Definition
from muntin.window.assessment import Assessment, target_of
from muntin.window.coded import code, group_numbers, setting_sd, shared_by
from muntin.window.grid import judged_grid
from muntin.window.predicted import Predicted

Array = NDArray[np.float64]
Truths = NDArray[np.bool_]
Aim = Literal["edge", "best", "both"]
_NODES = 8
_WATCHED = 1500
# Sets of levels are told apart by few watched points, not by few nodes.
_SCOUTED = 100
_DECIDED = 1e-3
# A plate's shared errors leave little to learn from more wells of the best condition than these.
_MOST_REPEATS = 4


class NoConditionLeftError(ValueError):
    """No condition is left that may be chosen."""


@dataclass
class Weighing:
    """Candidates under weighing: outlooks that are updated with each well taken."""

    view: Assessment
    offered: Weighed
    run: tuple[RunCondition, ...]
    seed: int
    budget: Budget | None = None
    taken: list[int] = field(default_factory=list)

    def __post_init__(self) -> None:
        definition = self.view.study.definition
        self.levels = Levels(definition, self.offered.targets)
        judged, _ = judged_grid(definition)
        actual = self.offered.actual
        self.X, self.P = code(definition, actual), code(definition, judged)
        self.setting = setting_sd(definition, actual, self.offered.measured)
        self.responses = [r for r in definition.judged if r.name in self.view.surfaces]
        self.targets = tuple(target_of(r) for r in self.responses)
        surfaces = [self.view.surfaces[r.name] for r in self.responses]
        self.today = [
            Tails.of(Predicted.of(surface, self.P, target, np.zeros_like(self.P)))
            for surface, target in zip(surfaces, self.targets, strict=True)
        ]
        p = np.prod([tails.meets for tails in self.today], axis=0)
        self.watched = _undecided(p)
        self.outlooks = self._outlooks(self.P, self.watched)
        self.greedy = LazyGreedy(EdgeCriterion(self.outlooks, self.targets), len(self.X))
        self.best: tuple[Outlook, ...] = ()

    def _outlooks(self, P: Array, watched: NDArray[np.intp]) -> tuple[Outlook, ...]:
        definition = self.view.study.definition
        new = self.offered.targets.assign(plate="new")
        outlooks = []
        for response in self.responses:
            shared = shared_by(definition, response)
            outlooks.append(
                Outlook(
                    self.view.surfaces[response.name].lightened(_NODES),
                    P,
                    self.X,
                    tuple(future_groups(definition, new, by) for by in shared.inside),
                    tuple(future_groups(definition, new, by) for by in shared.scale),
                    watched,
                    self.setting,
                )
            )
        return tuple(outlooks)

    def turn(self, aim: Aim, number: int) -> Literal["edge", "best"]:
        """What the next pick is for; `both` takes turns.

        Before any reading it is the edge whatever the aim. Expected improvement under the prior
        alone seeks the largest variance, which lies in the corners, and is begun after wells that
        fill the range (Jones, Schonlau & Welch 1998); those of the edge do.
        """
        if self.view.fresh:
            return "edge"
        if aim == "both":
            return "edge" if number % 2 == 0 else "best"
        return aim

    def settle(self, aim: Aim, wells: int) -> None:
        """Choose the levels of factors with `per_plate` for so many wells, and look whether the
        protein suffices. Raises ProteinShortError and NoConditionLeftError.
        """
        if wells and aim != "best" and not self.view.fresh and self.levels.most:
            watched = self.watched[_evenly(len(self.watched), _SCOUTED)]
            light = self._outlooks(self.P[watched], np.arange(len(watched)))
            for outlook in light:
                for candidate in self.taken:
                    outlook.pick(candidate)
            levels = self.levels if aim == "edge" else self._with_best()
            scout = Scout(light, self.targets, levels, wells, self.offered.barred)
            self._keep_to(choose_level_sets(scout), wells)
        open_wells = self.levels.open() & ~self.offered.barred
        if wells and not open_wells.any():
            raise NoConditionLeftError
        if self.budget is not None:
            self.budget.require(open_wells, wells)

    def _with_best(self) -> Levels:
        """The levels in use, and those of the first well that may be best."""
        open_wells = self.levels.open() & ~self.offered.barred
        return self.levels.with_one([self.choose("best", new=True, open_wells=open_wells)])

    def _keep_to(self, sets: Mapping[str, frozenset[Any]], wells: int) -> None:
        """Keep to sets of levels, unless no well that the protein allows lies on them."""
        kept = self.levels.over(self.offered.targets)
        for name, levels in sets.items():
            kept.keep_to(name, levels)
        open_wells = kept.open() & ~self.offered.barred
        if open_wells.any() and (
            self.budget is None
            or self.budget.mg[open_wells].min() * wells <= self.budget.left + 1e-9
        ):
            self.levels = kept

    def open(self, wells: int, block: int) -> Truths:
        """Which candidates may be taken next with so many wells to come, `block` at a condition."""
        open_wells = self.levels.open() & ~self.offered.barred
        if self.budget is None:
            return open_wells
        size = min(block, wells)
        return self.budget.affordable(self.levels, open_wells, wells, size, self.taken)

    def choose(
        self,
        purpose: Literal["edge", "best"],
        new: bool,
        open_wells: Truths | None = None,
    ) -> int:
        """The best of the open candidates; without `new` of those already in the plan, if any."""
        open_wells = self.levels.open() if open_wells is None else open_wells
        again = open_wells & np.isin(np.arange(len(self.X)), self.taken)
        if not new and again.any():
            open_wells = again
        if purpose == "edge":
            return self.greedy.best(open_wells)
        if not self.best:
            self.best = self._outlooks(self.X, np.zeros(0, dtype=np.intp))
            for candidate in self.taken:
                for outlook in self.best:
                    outlook.pick(candidate)
        names = list(self.offered.targets.columns)
        ran = pd.DataFrame([r.values for r in self.run], columns=names)
        X = code(self.view.study.definition, ran) if len(ran) else self.X[:0]
        values = BestCriterion(self.best, self.targets, X).values(self.taken)
        count = np.bincount(self.taken, minlength=len(values))
        rested = open_wells & (count < _MOST_REPEATS)
        return int(np.argmax(np.where(rested if rested.any() else open_wells, values, -np.inf)))

    def take(self, candidate: int, held: bool = False) -> None:
        """Put a well at a candidate into the plan; what held wells need is not in the budget."""
        for outlook in (*self.outlooks, *self.best):
            outlook.pick(candidate)
        self.taken.append(candidate)
        self.levels.use(candidate)
        if self.budget is not None and not held:
            self.budget.spend(candidate)

    def forecast(self) -> float:
        """Expected wrong share with the wells taken so far read."""
        return wrong_share(self.outlooks, self.today)


def _undecided(p: Array) -> NDArray[np.intp]:
    """Judged points whose verdict is open, at most _WATCHED spread evenly among them; all others
    add nothing to the criterion.
    """
    still_open = np.flatnonzero(p * (1.0 - p) > _DECIDED)
    watched = still_open if len(still_open) >= 10 else np.arange(len(p))
    return watched[_evenly(len(watched), _WATCHED)]


def _evenly(count: int, most: int) -> NDArray[np.intp]:
    """At most so many of the numbers from 0 to `count`, evenly."""
    return np.unique(np.round(np.linspace(0, count - 1, min(count, most))).astype(np.intp))


def future_groups(
    definition: Definition, new: pd.DataFrame, by: tuple[str, ...]
) -> NDArray[np.intp]:
    """Groups on the new plate; a column that only the run plates know is the plate's own."""
    known = tuple(name for name in by if name in new)
    return group_numbers(definition, new, known or ("plate",))
