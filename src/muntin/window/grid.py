"""Conditions at which the window is judged: bench steps of the whole range, inside the limits."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.record.factors import Factor

MOST = 4000
_GRID_FACTORS = 3
_SCATTERED = 2048


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
    while np.prod([float(len(v)) for v in levels]) > most:
        numeric = [i for i, f in enumerate(definition.factors) if f.continuous]
        finest = max(numeric, key=lambda i: len(levels[i]), default=-1)
        if finest < 0 or len(levels[finest]) < 4:
            break
        levels[finest] = thinned(levels[finest])
    grid = pd.MultiIndex.from_product(levels, names=definition.factor_names).to_frame(index=False)
    return _allowed(definition, grid), True


def thinned(levels: NDArray[np.float64]) -> NDArray[np.float64]:
    """Fewer levels (about a fifth fewer), still spread evenly from the first to the last."""
    count = max(3, int(len(levels) * 0.8))
    picked = np.round(np.linspace(0, len(levels) - 1, count)).astype(int)
    return levels[np.unique(picked)]


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
