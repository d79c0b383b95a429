"""Settings around a condition at which the process may find itself."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition

Array = NDArray[np.float64]


def settings_around(
    definition: Definition, frame: pd.DataFrame, rule: int | None = None
) -> Iterator[tuple[float, pd.DataFrame]]:
    """Weights and settings (raw units) around conditions, spread evenly within kept_within.

    rule: points a factor, in place of the usual ones.
    """
    factors = [f for f in definition.factors if f.kept_within is not None]
    points, weights = _even_spread(len(factors), rule)
    for point, weight in zip(points, weights, strict=True):
        moved = frame.copy()
        for factor, u in zip(factors, point, strict=True):
            x = frame[factor.name].to_numpy(dtype=float)
            width = 0.0 if factor.kept_within is None else factor.kept_within.at(x)
            moved[factor.name] = _inside(factor.scale, x, u * width)
        yield float(weight), moved


def _even_spread(factors: int, rule: int | None = None) -> tuple[Array, Array]:
    """Points (n, factors) of [-1, 1] and weights (n,).

    Products of Gauss-Legendre rules, of three points to three factors and of two beyond, or of
    `rule` points.
    """
    x, w = np.polynomial.legendre.leggauss(rule or (3 if factors <= 3 else 2))
    grids = np.meshgrid(*[x] * factors, indexing="ij")
    weights = np.prod(np.meshgrid(*[w / 2.0] * factors, indexing="ij"), axis=0)
    return np.stack([g.ravel() for g in grids], axis=1), weights.ravel()


def _inside(scale: str, x: Array, shift: Array) -> Array:
    """Settings x + shift; on a log scale never below a tenth of x."""
    moved = x + shift
    return np.maximum(moved, 0.1 * x) if scale == "log" else moved
