"""Plates of wells that do not look at the readings: spread over the range, or a full factorial."""

from __future__ import annotations

from itertools import product

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.bridging import bridging_conditions
from muntin.design.candidates import candidate_frame, plannable, run_conditions
from muntin.design.levels import Levels
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.window.assessment import Assessment
from muntin.window.coded import code
from muntin.window.grid import judged_grid

Array = NDArray[np.float64]
_RANGE = 600
# How often each spread well is chosen anew.
_SWEEPS = 3
# What a factorial may lose of the wells to be even, for each step of the largest over the least
# number of levels.
_UNEVEN = 0.1
# Where limits take conditions out, larger factorials are tried, of so many times the wells.
_LARGER = (1.25, 1.5, 2.0, 3.0, 4.0)


def bridging(view: Assessment) -> pd.DataFrame:
    """The conditions (raw units) that bridge to earlier plates, a row a well; none on the first."""
    definition = view.study.definition
    names = list(definition.factor_names)
    run = () if view.fresh else run_conditions(view.study)
    ran = pd.DataFrame([r.values for r in run], columns=names)
    keep = np.flatnonzero(plannable(definition, ran)) if run else np.zeros(0, dtype=int)
    ran = ran.iloc[keep].reset_index(drop=True)
    if ran.empty or not definition.plan.bridging_wells:
        return ran.iloc[:0]

    def beside(first: int) -> NDArray[np.bool_]:
        levels = Levels(definition, ran)
        levels.use(first)
        return levels.open()

    p_mean = view.judged(ran, "mean")
    wells = definition.plan.bridging_wells
    chosen = bridging_conditions([run[i] for i in keep], p_mean, wells, beside)
    return ran.iloc[[number for number, _ in chosen]].reset_index(drop=True)


def space_filling(view: Assessment, wells: int, beside: pd.DataFrame) -> pd.DataFrame:
    """So many conditions (raw units) that shorten the way from anywhere in the range to the nearest
    well, those run and those `beside` them on the plate included.

    Each is the best one beside those chosen before, then each in turn is chosen anew.
    """
    definition = view.study.definition
    run = () if view.fresh else run_conditions(view.study)
    frame = candidate_frame(definition, run)
    ran = pd.DataFrame([r.values for r in run], columns=list(definition.factor_names))
    known = pd.concat([part for part in (ran, beside) if len(part)] or [ran], ignore_index=True)
    filling = _Filling(definition, frame, beside, known)
    picked: list[int] = []
    for _ in range(wells):
        picked.append(filling.best(picked))
    for place in [*range(wells)] * _SWEEPS:
        picked[place] = filling.best(picked[:place] + picked[place + 1 :])
    return frame.iloc[picked].reset_index(drop=True)


class _Filling:
    """The ways from anywhere in the range to candidates, squared, and to the wells known."""

    def __init__(
        self, definition: Definition, frame: pd.DataFrame, beside: pd.DataFrame, known: pd.DataFrame
    ) -> None:
        self.definition, self.count = definition, len(frame)
        self.every = pd.concat([frame, beside], ignore_index=True) if len(beside) else frame
        anywhere = code(definition, judged_grid(definition, _RANGE, planned=True)[0])
        self.away = _squares(anywhere, code(definition, frame))
        self.nearest = np.full(len(anywhere), float(self.away.max(initial=1.0)))
        if len(known):
            ways = _squares(anywhere, code(definition, known)).min(axis=1)
            self.nearest = np.minimum(self.nearest, ways)

    def best(self, others: list[int]) -> int:
        """The candidate that shortens the way most beside others, on levels that are open."""
        levels = Levels(self.definition, self.every)
        for candidate in [*range(self.count, len(self.every)), *others]:
            levels.use(candidate)
        nearest = np.minimum(self.nearest, self.away[:, others].min(axis=1, initial=np.inf))
        left = np.minimum(self.away, nearest[:, None]).mean(axis=0)
        return int(np.argmin(np.where(levels.open()[: self.count], left, np.inf)))


def _squares(X: Array, Z: Array) -> Array:
    """Squared distances (n, m) of coded X (n, D) and Z (m, D)."""
    return np.asarray(((X[:, None, :] - Z[None, :, :]) ** 2).sum(-1))


def full_factorial(definition: Definition, wells: int, beside: pd.DataFrame) -> pd.DataFrame | None:
    """A full factorial of at most so many wells inside the limits (raw units), from end to end of
    the plan's range, without what is forbidden; wells left over repeat its middle. None where no
    factorial is so small.

    Factors with `per_plate` keep room for the levels of the wells `beside` it.
    """
    every = [_level_counts(f, wells, beside) for f in definition.factors]
    cut = bool(definition.limits or definition.forbidden)
    budgets = [int(wells * share) for share in (1.0, *(_LARGER if cut else ()))]
    tried = [
        _inside(definition, counts) for n in budgets if (counts := _evenest(definition, every, n))
    ]
    frame = max((f for f in tried if 0 < len(f) <= wells), key=len, default=None)
    if frame is None:
        return None
    middle = int(np.argmin((code(definition, frame) ** 2).sum(axis=1)))
    rest = frame.iloc[[middle] * (wells - len(frame))]
    return pd.concat([frame, rest], ignore_index=True)


def _inside(definition: Definition, counts: tuple[int, ...]) -> pd.DataFrame:
    """The conditions of a factorial of so many levels a factor that a plan may use."""
    levels = [_levels(f, n) for f, n in zip(definition.factors, counts, strict=True)]
    names = list(definition.factor_names)
    frame = pd.MultiIndex.from_product(levels, names=names).to_frame(index=False)
    may = definition.allowed(frame) & ~definition.forbids(frame)
    return frame[may].reset_index(drop=True)


def _level_counts(factor: Factor, wells: int, beside: pd.DataFrame) -> range:
    """How many levels a factor may have in a factorial."""
    most = len(factor.plan_levels())
    if not factor.continuous:
        return range(most, most + 1)
    if factor.per_plate is not None:
        taken = beside[factor.name].nunique() if len(beside) else 0
        most = min(most, max(factor.per_plate - taken, 1))
    return range(min(2, most), min(most, wells) + 1)


def _evenest(definition: Definition, every: list[range], wells: int) -> tuple[int, ...] | None:
    """The numbers of levels that use the wells best with even numbers; most go to the factors
    without `per_plate`, then to those of the finest steps.
    """
    ranged = [i for i, f in enumerate(definition.factors) if f.continuous]
    smallest = float(np.prod([r.start for r in every]))
    every = [range(r.start, min(r.stop - 1, int(wells / smallest * r.start)) + 1) for r in every]
    best: tuple[tuple[float, float, float], tuple[int, ...]] | None = None
    for counts in product(*every):
        size = float(np.prod(counts))
        if size > wells:
            continue
        own = [counts[i] for i in ranged]
        uneven = max(own) / min(own) - 1.0 if own else 0.0
        free = sum(counts[i] for i in ranged if definition.factors[i].per_plate is None)
        fine = sum(counts[i] * len(definition.factors[i].plan_levels()) for i in ranged)
        rank = (round(size / wells - _UNEVEN * uneven, 9), float(free), float(fine))
        if best is None or rank > best[0]:
            best = rank, counts
    return None if best is None else best[1]


def _levels(factor: Factor, count: int) -> NDArray[np.object_] | NDArray[np.float64]:
    """So many levels of the plan's range, evenly from end to end, or all choices."""
    levels = factor.plan_levels()
    if not factor.continuous:
        return levels
    if count == 1:
        return levels[[len(levels) // 2]]
    return levels[np.round(np.linspace(0, len(levels) - 1, count)).astype(int)]
