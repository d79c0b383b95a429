"""Cells: wells with the same condition and the same shared errors, collapsed without loss.

With additive normal noise of equal variance the mean, the count and the sum of squares about the
mean are sufficient for every link (Binois, Gramacy & Ludkovski 2018, section 2.2).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_UNSAID = np.zeros(0, dtype=np.intp)
_NO_SETTING = np.zeros((0, 0))


@dataclass(frozen=True, kw_only=True)
class Readings:
    """Readings of one response, on the scale on which noise is additive.

    X (n, D) coded; y (n,); sd (n,) standard uncertainty of each reading beside the common noise,
    0 where none is known; inside and scale: one group number (n,) a shared error. censored (n,):
    0 for a reading, -1 where it lies below y, 1 where above. setting (n, D): sd with which the
    bench set each coded column, 0 where it was measured or is unknown. plate (n,): number of the
    plate. The last three are zeros unless given.
    """

    X: Array
    y: Array
    sd: Array
    inside: tuple[Index, ...] = ()
    scale: tuple[Index, ...] = ()
    censored: Index = field(default_factory=lambda: _UNSAID)
    setting: Array = field(default_factory=lambda: _NO_SETTING)
    plate: Index = field(default_factory=lambda: _UNSAID)

    def __post_init__(self) -> None:
        """Fill in what was not given."""
        n = len(self.y)
        for name, unsaid, shape in (
            ("censored", _UNSAID, n),
            ("setting", _NO_SETTING, self.X.shape),
            ("plate", _UNSAID, n),
        ):
            if getattr(self, name) is unsaid:
                object.__setattr__(self, name, np.zeros(shape, dtype=unsaid.dtype))

    def __len__(self) -> int:
        return len(self.y)

    def take(self, rows: Index) -> Readings:
        """The readings of some rows."""
        return Readings(
            X=self.X[rows],
            y=self.y[rows],
            sd=self.sd[rows],
            inside=tuple(g[rows] for g in self.inside),
            scale=tuple(g[rows] for g in self.scale),
            censored=self.censored[rows],
            setting=self.setting[rows],
            plate=self.plate[rows],
        )


@dataclass(frozen=True, kw_only=True)
class Cells:
    """Readings collapsed to C cells over U latent values.

    X (U, D) and inside (U, J): condition and inside-error groups of each latent value.
    latent (C,): latent value that a cell reads. scale: group numbers (C,) of each scale error.
    count, mean, within, variance (C,): number of readings, their mean, their sum of squares about
    it, and the known variance of one reading. censored (C,): 0, or -1 and 1 where the one reading
    of the cell lies below or above its mean. setting (C, D): sd with which the bench set a reading,
    coded columns. cell (n,): the cell of each reading y (n,).
    """

    X: Array
    inside: Index
    latent: Index
    scale: tuple[Index, ...]
    count: Array
    mean: Array
    within: Array
    variance: Array
    censored: Index
    setting: Array
    cell: Index
    y: Array

    def __len__(self) -> int:
        return len(self.count)

    @cached_property
    def scale_groups(self) -> tuple[int, ...]:
        """Number of groups of each scale error."""
        return tuple(int(g.max(initial=-1)) + 1 for g in self.scale)


def _group(rows: Array) -> tuple[Array, Index]:
    """Distinct rows in order of first appearance, and the number of each row's group."""
    if not len(rows):
        return rows, np.zeros(0, dtype=np.intp)
    _, first, inverse = np.unique(np.round(rows, 9), axis=0, return_index=True, return_inverse=True)
    order = np.argsort(first)
    rank = np.empty_like(order)
    rank[order] = np.arange(len(order))
    return rows[first[order]], rank[inverse.reshape(-1)]


def _stack(columns: Sequence[Index], n: int) -> Array:
    return np.stack(columns, axis=1).astype(float) if columns else np.zeros((n, 0))


def collapse(readings: Readings) -> Cells:
    """The cells of the readings; wells whose known sds differ, and censored ones, stay apart."""
    n, depth = readings.X.shape
    inside, scale = _stack(readings.inside, n), _stack(readings.scale, n)
    latents, latent = _group(np.concatenate([readings.X, inside], axis=1))
    # Sds are told apart in shares of the largest, whatever the unit.
    unit = max(float(readings.sd.max(initial=0.0)), 1e-300)
    known = readings.sd[:, None] / unit
    # A censored reading is a cell of its own.
    alone = np.where(readings.censored != 0, 1.0 + np.arange(n), 0.0)[:, None]
    keys = [latent[:, None].astype(float), scale, known, readings.setting, alone]
    rows, cell = _group(np.concatenate(keys, axis=1))
    _, first = np.unique(cell, return_index=True)
    count = np.bincount(cell, minlength=len(rows)).astype(float)
    mean = np.bincount(cell, readings.y, len(rows)) / np.maximum(count, 1.0)
    within = np.bincount(cell, (readings.y - mean[cell]) ** 2, len(rows)).astype(float)
    return Cells(
        X=latents[:, :depth],
        inside=latents[:, depth:].astype(np.intp),
        latent=rows[:, 0].astype(np.intp),
        scale=tuple(rows[:, 1 + j].astype(np.intp) for j in range(scale.shape[1])),
        count=count,
        mean=mean,
        within=within,
        variance=(unit * rows[:, 1 + scale.shape[1]]) ** 2,
        censored=readings.censored[first],
        setting=readings.setting[first],
        cell=cell,
        y=readings.y,
    )
