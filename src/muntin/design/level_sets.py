"""The set of levels that a plate is given of a factor with `per_plate`.

Levels taken as the picks come are spent on what the first wells ask for. Here a greedy pass
without the restriction tells to which levels the wells would go; sets of levels are then judged by
what a greedy pass inside them makes of the edge criterion, and one level at a time is exchanged
while that gains.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Collection, Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.edge import EdgeCriterion, LazyGreedy
from muntin.design.levels import Levels
from muntin.design.outlook import Outlook
from muntin.record.factors import Factor
from muntin.window.probability import Target

Truths = NDArray[np.bool_]
LevelSet = frozenset[Any]
_MOST_WELLS = 16  # of a greedy pass: later wells hardly tell sets of levels apart
_MOST_SETS = 24  # judged for one factor


@dataclass
class Scout:
    """A light criterion that judges sets of levels by a greedy pass inside them.

    outlooks: of few nodes and watched points, with the wells that are already in the plan. wells:
    how many are still to be chosen. closed (Q,): candidates that may not be taken.
    """

    outlooks: tuple[Outlook, ...]
    targets: tuple[Target, ...]
    levels: Levels
    wells: int
    closed: Truths
    _bound: NDArray[np.float64] | None = field(default=None, init=False)

    def run(self, levels: Levels) -> tuple[float, list[int]]:
        """What the wells of a greedy pass reach (more is better), and which they are."""
        criterion = EdgeCriterion(tuple(o.branch() for o in self.outlooks), self.targets)
        greedy = LazyGreedy(criterion, len(self.closed))
        if self._bound is None:
            every = np.arange(len(self.closed))
            self._bound = criterion.with_one(every) - criterion.now()
        greedy.bound = self._bound.copy()
        picks: list[int] = []
        for _ in range(min(self.wells, _MOST_WELLS)):
            open_wells = levels.open() & ~self.closed
            if not open_wells.any():
                return -np.inf, picks
            picks.append(greedy.best(open_wells))
            levels.use(picks[-1])
            for outlook in criterion.outlooks:
                outlook.pick(picks[-1])
        return criterion.now(), picks


def choose_level_sets(scout: Scout) -> dict[str, LevelSet]:
    """Choose the levels of every factor whose levels are more than a plate may hold.

    The factors take their turns in order; later ones are free while an earlier one is chosen.
    """
    chosen: dict[str, LevelSet] = {}
    for factor in scout.levels.definition.factors:
        here = _levels_of(scout, factor)
        if factor.name in scout.levels.most and len(here) > scout.levels.most[factor.name]:
            chosen[factor.name] = _choose(scout, factor, here, chosen)
    return chosen


def _levels_of(scout: Scout, factor: Factor) -> list[Any]:
    """The levels of a factor among the candidates that may be taken, and those in use, in order."""
    values = scout.levels.frame[factor.name][~scout.closed]
    here = set(values) | set(scout.levels.used.get(factor.name, ()))
    return [level for level in factor.plan_levels().tolist() if level in here]


def _choose(
    scout: Scout, factor: Factor, here: Sequence[Any], chosen: dict[str, LevelSet]
) -> LevelSet:
    name, most = factor.name, scout.levels.most[factor.name]
    used = scout.levels.used[name]
    if len(used) >= most:
        return used

    def value(levels: LevelSet) -> float:
        return scout.run(_kept(scout, {**chosen, name: levels}))[0]

    free_levels = _kept(scout, chosen)
    free_levels.set_free(name)
    _, free = scout.run(free_levels)
    weights = Counter(scout.levels.frame[name].iloc[free])
    first_come = _taken(scout, chosen, name, most, here)
    start = _medoids(here, weights, used, most)
    return _exchanged([start, first_come], here, used, value)


def _kept(scout: Scout, sets: dict[str, LevelSet]) -> Levels:
    levels = scout.levels.over(scout.levels.frame)
    for name, kept in sets.items():
        levels.keep_to(name, kept)
    return levels


def _taken(
    scout: Scout, chosen: dict[str, LevelSet], name: str, most: int, here: Sequence[Any]
) -> LevelSet:
    """The levels that a greedy pass takes as they come, filled up evenly where it needs fewer."""
    _, picks = scout.run(_kept(scout, chosen))
    column: pd.Series = scout.levels.frame[name]
    used = sorted(scout.levels.used[name], key=here.index)
    levels = list(dict.fromkeys([*used, *column.iloc[picks]]))
    return _filled_up(levels[:most], here, most)


def _filled_up(levels: Collection[Any], here: Sequence[Any], most: int) -> LevelSet:
    """So many levels, the missing ones farthest (in steps) from those there are."""
    out = list(levels)
    while len(out) < min(most, len(here)):
        places = [here.index(level) for level in out]
        gaps = [min((abs(i - p) for p in places), default=0) for i in range(len(here))]
        out.append(here[int(np.argmax(gaps))] if out else here[len(here) // 2])
    return frozenset(out)


def _medoids(
    here: Sequence[Any], weights: Counter[Any], used: Collection[Any], most: int
) -> LevelSet:
    """Levels in use, and those that lie nearest (in steps) to where the wells would go."""
    out = sorted(used, key=here.index)
    wanted = [(here.index(level), count) for level, count in weights.items() if level in here]

    def away(levels: Sequence[Any]) -> float:
        places = [here.index(level) for level in levels]
        return sum(count * min(abs(at - p) for p in places) for at, count in wanted)

    while len(out) < min(most, len(here)):
        rest = [level for level in here if level not in out]
        best = min(rest, key=lambda level: away([*out, level]))
        if out and away([*out, best]) >= away(out):
            return _filled_up(out, here, most)
        out.append(best)
    return frozenset(out)


def _exchanged(
    starts: Sequence[LevelSet],
    here: Sequence[Any],
    used: Collection[Any],
    value: Callable[[LevelSet], float],
) -> LevelSet:
    """The best set reached from the starts by exchanging one level at a time."""
    known = {levels: value(levels) for levels in dict.fromkeys(starts)}
    best = max(known, key=lambda levels: known[levels])
    moved = True
    while moved:
        moved = False
        for levels in _neighbours(best, here, used):
            if levels in known:
                continue
            if len(known) >= _MOST_SETS:
                return best
            known[levels] = value(levels)
            if known[levels] > known[best]:
                best, moved = levels, True
                break
    return best


def _neighbours(levels: LevelSet, here: Sequence[Any], used: Collection[Any]) -> Iterator[LevelSet]:
    """Sets with one level moved a few steps or one step, the larger moves first."""
    wide = max(1, len(here) // (3 * len(levels)))
    for step in dict.fromkeys((wide, 1)):
        for level in sorted(levels - set(used), key=here.index):
            for to in (here.index(level) - step, here.index(level) + step):
                if 0 <= to < len(here) and here[to] not in levels:
                    yield levels - {level} | {here[to]}
