"""Conditions at which the window is judged: bench steps of the whole range, inside the limits."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.record.factors import Factor

MOST = 4000
_GRID_FACTORS = 3
_SCATTERED = 2048
_FEW, _MANY = 100, 1e6


def judged_grid(
    definition: Definition, most: int = MOST, planned: bool = False
) -> tuple[pd.DataFrame, bool]:
    """Conditions (rows, raw units) that fill the range, and whether they form a grid.

    Bench steps, coarsened evenly where there are more than `most`; Sobol' points on bench steps
    beyond three factors. planned: only what new plans may use.
    """
    if len(definition.factors) > _GRID_FACTORS:
        count = min(most, _SCATTERED)
        return _allowed(definition, scattered(definition, count, 0, planned)), False
    levels = [f.plan_levels() if planned else f.levels() for f in definition.factors]
    grid = _allowed(definition, _product(definition, coarsened(definition, levels, most)))
    if len(grid) < _FEW and np.prod([float(len(v)) for v in levels]) <= _MANY:
        # Narrow limits fall between coarse levels: take every step that they allow.
        grid = _allowed(definition, _product(definition, levels))
        if len(grid) > most:
            rows = np.round(np.linspace(0, len(grid) - 1, most)).astype(int)
            return grid.iloc[rows].reset_index(drop=True), False
    return grid, True


def coarsened(definition: Definition, levels: list[NDArray[Any]], most: int) -> list[NDArray[Any]]:
    """Fewer levels of the factors with a range, evenly from the first to the last, so that there
    are at most `most` combinations; never fewer than three, choices stay.
    """
    counts = [len(v) for v in levels]
    numeric = [i for i, f in enumerate(definition.factors) if f.continuous]
    while np.prod([float(c) for c in counts]) > most:
        finest = max(numeric, key=lambda i: counts[i], default=-1)
        if finest < 0 or counts[finest] < 4:
            break
        counts[finest] = max(3, int(counts[finest] * 0.9))
    picked = [np.round(np.linspace(0, len(v) - 1, n)) for v, n in zip(levels, counts, strict=True)]
    return [v[np.unique(p).astype(int)] for v, p in zip(levels, picked, strict=True)]


def _product(definition: Definition, levels: list[NDArray[Any]]) -> pd.DataFrame:
    return pd.MultiIndex.from_product(levels, names=definition.factor_names).to_frame(index=False)


def scattered(definition: Definition, count: int, seed: int, planned: bool) -> pd.DataFrame:
    """Sobol' conditions (count, factors) on bench steps of the range, or of the plan's range."""
    from scipy.stats.qmc import Sobol

    sobol = Sobol(len(definition.factors), rng=np.random.default_rng(seed))
    power = int(np.ceil(np.log2(max(2, count))))
    points = sobol.random_base2(power)[:count]
    columns = {
        factor.name: _pick(factor, points[:, i], planned)
        for i, factor in enumerate(definition.factors)
    }
    return pd.DataFrame(columns)


def _pick(factor: Factor, unit: NDArray[np.float64], planned: bool) -> NDArray[np.object_]:
    levels = factor.plan_levels() if planned else factor.levels()
    if factor.continuous and factor.scale == "log":
        position = np.interp(
            np.log(levels[0]) + unit * np.log(levels[-1] / levels[0]),
            np.log(levels.astype(float)),
            np.arange(len(levels)),
        )
        return levels[np.round(position).astype(int)]
    return levels[np.minimum((unit * len(levels)).astype(int), len(levels) - 1)]


def _allowed(definition: Definition, frame: pd.DataFrame) -> pd.DataFrame:
    unique = frame.drop_duplicates()
    return unique[definition.allowed(unique)].reset_index(drop=True)
