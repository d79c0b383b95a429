"""The posterior of one law on a grid: capacity, half time and noise, all as logarithms.

The load at equilibrium is the capacity, or what is offered where that is less. Every noise has half
times of its own and every half time capacities of its own, shrunk onto the posterior, since two
readings can be met exactly and the posterior is then the narrower the smaller the noise. Where what
is offered parts the capacities the density bends, so they have two spans.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from scipy.special import log_ndtr, logsumexp

from muntin.assay.uptake_laws import Law
from muntin.assay.uptake_priors import Priors
from muntin.assay.uptake_table import Curve
from muntin.record.keys import Floats

_FEW, _NOISES = 9, 17
_COARSE, _FINE = 21, 61
_SEEK, _CAPACITIES = 13, 25
_GOLDEN = 0.5 * (np.sqrt(5.0) - 1.0)
_REACH = 5.0  # sds of the prior to which the grid goes at first
_FAINT = 20.0  # nats below the top that are kept


@dataclass(frozen=True, kw_only=True, eq=False)
class Grid:
    """The posterior of one law: weighted nodes (nodes,), capacity in mg/mL resin, half time in min.

    `weights` add up to 1; `log_evidence` is that of the law; `noise` the posterior median of the
    noise as a share of the load at the last time.
    """

    law: Law
    capacity: Floats
    half_time: Floats
    weights: Floats
    offered: float | None
    log_evidence: float
    noise: float

    @property
    def equilibrium(self) -> Floats:
        """Load at equilibrium in mg/mL resin, (nodes,)."""
        most = np.inf if self.offered is None else self.offered
        return np.minimum(self.capacity, most)

    @property
    def takes(self) -> Floats:
        """Capacity over what is offered, (nodes,); 0 where that is not known."""
        return self.capacity / self.offered if self.offered else np.zeros_like(self.capacity)

    def share_at(self, minutes: float) -> Floats:
        """Return the share of equilibrium after a time, (nodes,)."""
        return self.law.share(minutes / self.half_time, self.takes)

    def load_at(self, minutes: float) -> Floats:
        """Return the load after a time in mg/mL resin, (nodes,)."""
        return self.equilibrium * self.share_at(minutes)

    def time_to(self, share: float) -> Floats:
        """Return the time to a share of equilibrium in min, (nodes,)."""
        return self.law.time(share, self.half_time, self.takes)


def posterior(law: Law, curve: Curve, priors: Priors) -> Grid:
    """Return the posterior of a law given a curve, by quadrature on a grid without chance."""
    model = _Model(law, _cells(curve), curve.offered, priors)
    ends = priors.noise.span(_REACH)
    for _ in range(2):
        log_noise = np.linspace(*ends, _FEW)
        log_half = model.half_times(log_noise, _COARSE)
        mass = _mass(log_noise, log_half, *model.capacities(log_half, log_noise, _CAPACITIES))
        ends = _kept(log_noise, logsumexp(mass, axis=(1, 2)))
    log_noise = np.linspace(*ends, _NOISES)
    log_half = model.half_times(log_noise, _FINE)
    log_capacity, density = model.capacities(log_half, log_noise, _CAPACITIES)
    mass = _mass(log_noise, log_half, log_capacity, density)
    evidence = float(logsumexp(mass))
    weights = np.exp(mass - evidence)
    told = weights > 1e-9
    half = np.broadcast_to(log_half[..., None], weights.shape)
    return Grid(
        law=law,
        capacity=np.exp(log_capacity[told]),
        half_time=np.exp(half[told]),
        weights=weights[told] / weights[told].sum(),
        offered=curve.offered,
        log_evidence=evidence,
        noise=float(np.exp(np.interp(0.5, _middles(weights.sum(axis=(1, 2))), log_noise))),
    )


class _Cell(NamedTuple):
    """Readings at one time with one sd: how many, their mean load, and their sum of squares about
    it; or one limit, where `side` is not 0.
    """

    time: float
    load: float
    sd: float
    side: float
    repeats: int
    squares: float

    def log_density(self, expected: Floats, variance: Floats) -> Floats:
        """Return the log density of the readings; `variance` is that of their noise."""
        beyond, whole = expected - self.load, variance + self.sd**2
        if self.side:
            return np.asarray(log_ndtr(self.side * beyond / np.sqrt(whole)))
        squares = self.repeats * beyond**2 + self.squares
        return np.asarray(-0.5 * (squares / whole + self.repeats * np.log(2.0 * np.pi * whole)))


def _cells(curve: Curve) -> tuple[_Cell, ...]:
    """Return repeats together, which changes nothing, and limits one by one."""
    groups: dict[tuple[float, ...], list[float]] = {}
    readings = zip(curve.times, curve.loads, curve.sds, curve.sides, strict=True)
    for number, (time, load, sd, side) in enumerate(readings):
        groups.setdefault((time, sd, side, number if side else -1), []).append(load)
    return tuple(
        _Cell(time, float(np.mean(loads)), sd, side, len(loads), float(np.var(loads)) * len(loads))
        for (time, sd, side, _), loads in groups.items()
    )


@dataclass(frozen=True)
class _Model:
    law: Law
    cells: tuple[_Cell, ...]
    offered: float | None
    priors: Priors

    def half_times(self, log_noise: Floats, count: int) -> Floats:
        """Return ln half times (noises, count) that hold the posterior at each noise."""
        low, high = self.priors.half_time.span(_REACH)
        lows, highs = np.full(len(log_noise), low), np.full(len(log_noise), high)
        for _ in range(5):
            grid = np.linspace(lows, highs, _COARSE, axis=-1)
            _, density = self.capacities(grid, log_noise, _SEEK)
            lows, highs = _spans(grid, density.max(axis=2))
        # Grids of different noises are set off against each other, so that their nodes together
        # lie closer than those of one.
        part = np.arange(len(log_noise)) * _GOLDEN % 1.0 - 0.5
        step = (highs - lows) / (count - 1)
        return np.linspace(lows + part * step, highs + part * step, count, axis=-1)

    def capacities(self, log_half: Floats, log_noise: Floats, count: int) -> tuple[Floats, Floats]:
        """Return ln capacities that hold the posterior at each (noise, half time), and the log
        density there; both have shape (noises, halves, capacities).
        """
        low, high = self.priors.capacity.span(_REACH)
        ends = [low, high]
        if self.offered is not None and low < np.log(self.offered) < high:
            ends.insert(1, float(np.log(self.offered)))
        grids, values = [], []
        for start, stop in pairwise(ends):
            lows, highs = np.full(log_half.shape, start), np.full(log_half.shape, stop)
            for _ in range(4):
                x = np.linspace(lows, highs, _SEEK, axis=-1)
                lows, highs = _spans(x, self.density(log_half, x, log_noise))
            grids.append(np.linspace(lows, highs, count, axis=-1))
            values.append(self.density(log_half, grids[-1], log_noise))
        return np.concatenate(grids, axis=-1), np.concatenate(values, axis=-1)

    def density(self, log_half: Floats, x: Floats, log_noise: Floats) -> Floats:
        """Return the log posterior density, up to a constant, at ln capacities `x` (noises, halves,
        capacities), ln half times (noises, halves) and ln noises (noises,).
        """
        offered, capacity = self.offered, np.exp(x)
        takes = capacity / offered if offered else np.zeros_like(capacity)
        level = np.minimum(capacity, offered) if offered else capacity
        rate = np.exp(-log_half)[..., None]
        last = level * self.law.share(max(cell.time for cell in self.cells) * rate, takes)
        variance = (last * np.exp(log_noise)[:, None, None]) ** 2
        total = (
            self.priors.half_time.log_density(log_half)[..., None]
            + self.priors.capacity.log_density(x)
            + self.priors.noise.log_density(log_noise)[:, None, None]
        )
        for cell in self.cells:
            expected = level * self.law.share(cell.time * rate, takes)
            total = total + cell.log_density(expected, variance)
        return total


def _mass(log_noise: Floats, log_half: Floats, x: Floats, density: Floats) -> Floats:
    """Return the log mass of each node (noises, halves, capacities)."""
    spans = x.reshape(*x.shape[:-1], -1, _CAPACITIES)
    volume = _trapezoid(log_noise)[:, None] * _trapezoid(log_half)
    with np.errstate(divide="ignore"):
        return np.asarray(density + np.log(volume[..., None] * _simpson(spans).reshape(x.shape)))


def _spans(x: Floats, density: Floats) -> tuple[Floats, Floats]:
    """Return the ends of grids (..., points) that hold the density, with a cell to spare."""
    held = density > density.max(axis=-1, keepdims=True) - _FAINT
    last = x.shape[-1] - 1
    first = np.maximum(held.argmax(axis=-1) - 1, 0)
    final = np.minimum(last - held[..., ::-1].argmax(axis=-1) + 1, last)
    low = np.take_along_axis(x, first[..., None], axis=-1)[..., 0]
    return low, np.take_along_axis(x, final[..., None], axis=-1)[..., 0]


def _kept(axis: Floats, density: Floats) -> tuple[float, float]:
    low, high = _spans(axis, density)
    return float(low), float(high)


def _trapezoid(x: Floats) -> Floats:
    """Return trapezoid weights over even points of the last axis."""
    weights = np.ones_like(x)
    weights[..., [0, -1]] = 0.5
    return np.asarray(weights * (x[..., 1:2] - x[..., :1]))


def _simpson(x: Floats) -> Floats:
    """Return Simpson's weights over even points, odd in number, of the last axis.

    Unlike the trapezoid's they are good at an end where the density has not died away.
    """
    weights = np.full_like(x, 2.0 / 3.0)
    weights[..., 1::2] = 4.0 / 3.0
    weights[..., [0, -1]] = 1.0 / 3.0
    return np.asarray(weights * (x[..., 1:2] - x[..., :1]))


def _middles(mass: Floats) -> Floats:
    return np.asarray(np.cumsum(mass) - 0.5 * mass)
