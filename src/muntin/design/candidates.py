"""Conditions that a new plate may run."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.record.limits import sample_conditions
from muntin.record.readings import USED
from muntin.record.study import Study
from muntin.window.grid import judged_grid

MOST = 2000


@dataclass(frozen=True)
class RunCondition:
    """A condition that was run: its factor values (targets), and the wells that ran it."""

    values: tuple[object, ...]
    wells: tuple[tuple[str, str], ...]
    bridged: bool


def run_conditions(study: Study) -> tuple[RunCondition, ...]:
    """The distinct conditions (targets) of the wells that were read, first run first."""
    names = study.definition.factor_names
    frame = study.informing()
    states = frame[[f"{r.name}_state" for r in study.definition.responses]]
    frame = frame[states.isin(USED).any(axis=1)]
    found: dict[tuple[object, ...], list[tuple[str, str, str]]] = {}
    targets = [frame[f"{n}_target"] for n in names]
    for *values, plate, well, role in zip(
        *targets, frame["plate"], frame["well"], frame["role"], strict=True
    ):
        plain = tuple(round(v, 9) if isinstance(v, float) else v for v in values)
        found.setdefault(plain, []).append((plate, well, role))
    return tuple(
        RunCondition(
            values, tuple((p, w) for p, w, _ in wells), any(r == "bridge" for *_, r in wells)
        )
        for values, wells in found.items()
    )


def candidate_frame(
    definition: Definition, run: tuple[RunCondition, ...], most: int = MOST
) -> pd.DataFrame:
    """Candidate conditions (raw units): bench steps of the plan's range inside the limits, and
    the conditions that were run and may be run again.

    On an opening plate a factor with `per_plate` gets so many levels, evenly over the plan's range.
    """
    names = list(definition.factor_names)
    grid, _ = judged_grid(definition, most, planned=True)
    if definition.forbidden:
        grid = _not_forbidden(definition, grid)
    if not run:
        grid = _spread(definition, grid)
    again = pd.DataFrame([r.values for r in run], columns=names)
    if len(again):
        again = again[plannable(definition, again)]
        grid = pd.concat([again.astype(grid.dtypes.to_dict()), grid], ignore_index=True)
    return grid.drop_duplicates(ignore_index=True)


def _not_forbidden(definition: Definition, grid: pd.DataFrame) -> pd.DataFrame:
    """The conditions that are not forbidden; where a coarse grid has none, those of every step."""
    if definition.forbids(grid).all():
        grid = sample_conditions(definition.factors, planned=True)
        grid = grid[definition.allowed(grid)].drop_duplicates()
    return grid[~definition.forbids(grid)].reset_index(drop=True)


def _spread(definition: Definition, grid: pd.DataFrame) -> pd.DataFrame:
    """The conditions on evenly spread levels of the factors with `per_plate`."""
    keep = np.ones(len(grid), dtype=bool)
    for factor in definition.factors:
        if factor.per_plate is not None and factor.continuous:
            levels = np.array(sorted(set(grid[factor.name])), dtype=float)
            ends = np.linspace(levels[0], levels[-1], min(factor.per_plate, len(levels)))
            if factor.per_plate == 1:
                ends = np.array([levels.mean()])
            nearest = levels[np.abs(levels[:, None] - ends).argmin(axis=0)]
            keep &= grid[factor.name].isin(nearest).to_numpy()
    return grid[keep] if keep.any() else grid


def plannable(definition: Definition, frame: pd.DataFrame) -> NDArray[np.bool_]:
    """Which rows of a frame (raw units) a new plan may run: on plan levels, inside the limits, not
    forbidden.
    """
    keep = definition.allowed(frame) & ~definition.forbids(frame)
    for factor in definition.factors:
        levels, values = factor.plan_levels(), frame[factor.name]
        if factor.continuous:
            x = values.to_numpy(dtype=float)
            slack = 1e-9 * factor.span[2]
            keep &= (np.abs(x[:, None] - levels[None, :].astype(float)) <= slack).any(axis=1)
        else:
            keep &= values.isin(levels).to_numpy()
    return np.asarray(keep, dtype=bool)
