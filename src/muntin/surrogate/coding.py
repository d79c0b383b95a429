"""Coding of factors: raw values to the coordinates in which the surrogates live."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, kw_only=True)
class Continuous:
    """A factor that is a number: low and high map to -1 and 1, after a log where `log` is set."""

    low: float
    high: float
    log: bool = False

    @property
    def width(self) -> int:
        """Coded columns that the factor takes."""
        return 1

    def code(self, values: ArrayLike) -> Array:
        """Raw values (n,) to coded coordinates (n, 1)."""
        x = np.asarray(values, dtype=float)
        low, high = self.low, self.high
        if self.log:
            x, low, high = np.log(x), float(np.log(low)), float(np.log(high))
        return ((2.0 * x - low - high) / (high - low))[:, None]


@dataclass(frozen=True, kw_only=True)
class Choice:
    """A factor that is a choice among `levels`: corners of a regular simplex of side 2.

    Side 2 is the coded range of a continuous factor, so one prior of length scales serves both.
    """

    levels: int

    @property
    def width(self) -> int:
        """Coded columns that the factor takes."""
        return self.levels - 1

    def code(self, values: ArrayLike) -> Array:
        """Level numbers 0 ... levels-1 (n,) to coded coordinates (n, levels - 1)."""
        index = np.asarray(values).astype(int)
        return self.corners()[index]

    def corners(self) -> Array:
        """Corners of the simplex (levels, levels - 1), pairwise 2 apart, centred on the origin."""
        k = self.levels
        centred = np.eye(k) - 1.0 / k
        helmert = np.zeros((k, k - 1))
        for j in range(1, k):
            helmert[:j, j - 1] = 1.0
            helmert[j, j - 1] = -j
            helmert[:, j - 1] /= np.sqrt(j * (j + 1.0))
        return np.sqrt(2.0) * centred @ helmert


@dataclass(frozen=True)
class Columns:
    """Which factor each coded column belongs to (D,), and whether a square makes sense in it."""

    factor: tuple[int, ...]
    curved: tuple[bool, ...]

    @classmethod
    def plain(cls, count: int) -> Columns:
        """Columns of `count` continuous factors, one each."""
        return cls(tuple(range(count)), (True,) * count)

    @property
    def factors(self) -> int:
        """Number of factors."""
        return max(self.factor) + 1


@dataclass(frozen=True)
class Coding:
    """The coding of all factors of a study, in order."""

    factors: tuple[Continuous | Choice, ...]

    @property
    def columns(self) -> Columns:
        """The coded columns of all factors."""
        owners = [i for i, factor in enumerate(self.factors) for _ in range(factor.width)]
        return Columns(
            tuple(owners), tuple(isinstance(self.factors[i], Continuous) for i in owners)
        )

    def code(self, columns: Sequence[ArrayLike]) -> Array:
        """Raw columns, one (n,) a factor with choices as level numbers, to coded X (n, D)."""
        parts = [f.code(values) for f, values in zip(self.factors, columns, strict=True)]
        return np.concatenate(parts, axis=1)
