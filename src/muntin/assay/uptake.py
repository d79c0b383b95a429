"""Contact time: what an uptake curve says of the load after a time, under every law and over all.

The laws have equal prior weight; the weight of each after the readings is its evidence (Hoeting,
Madigan, Raftery & Volinsky 1999, Stat. Sci. 14:382).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from muntin.assay.uptake_laws import laws_for
from muntin.assay.uptake_priors import Priors
from muntin.assay.uptake_quadrature import Grid, posterior
from muntin.assay.uptake_table import Curve
from muntin.record.keys import Floats

_TAIL = 0.025


@dataclass(frozen=True)
class Interval:
    """The mean, the median and the central 95 % of a quantity."""

    mean: float
    median: float
    low: float
    high: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Uptake:
    """The posterior of a curve: one grid a law, with the laws' weights; loads in mg/mL resin,
    times in min.
    """

    curve: Curve
    priors: Priors
    grids: tuple[Grid, ...]
    law_weights: tuple[float, ...]

    @property
    def best(self) -> Grid:
        """The law with the largest weight."""
        return self.grids[int(np.argmax(self.law_weights))]

    def over_laws(self, what: Callable[[Grid], Floats]) -> tuple[Floats, Floats]:
        """Return values and weights of all laws' nodes, each law by its weight."""
        values = np.concatenate([what(grid) for grid in self.grids])
        pairs = zip(self.grids, self.law_weights, strict=True)
        return values, np.concatenate([weight * grid.weights for grid, weight in pairs])

    def equilibrium(self) -> Interval:
        """Return the load at equilibrium."""
        return interval(*self.over_laws(lambda grid: grid.equilibrium))

    def time_to(self, share: float) -> Interval:
        """Return the time to a share of equilibrium below 1."""
        return interval(*self.over_laws(lambda grid: grid.time_to(share)))

    def load_at(self, minutes: float) -> Interval:
        """Return the load after a time, of the curve itself, without the noise of a reading."""
        return interval(*self.over_laws(lambda grid: grid.load_at(minutes)))

    def share_at(self, minutes: float) -> Interval:
        """Return the share of equilibrium after a time."""
        return interval(*self.over_laws(lambda grid: grid.share_at(minutes)))

    def whole(self) -> float:
        """Return the probability that all that is offered binds in the end, 0 where not known."""
        offered = self.curve.offered
        if offered is None:
            return 0.0
        # The node at the offer itself stands for what lies above it as much as below.
        level, weights = self.over_laws(lambda grid: grid.equilibrium)
        return float(weights[level >= offered * (1.0 - 1e-9)].sum())

    def noise(self) -> float:
        """Return the noise of one reading as a share of the last load, over the laws."""
        return float(np.dot(self.law_weights, [grid.noise for grid in self.grids]))


def judge_uptake(curve: Curve, priors: Priors) -> Uptake:
    """Return the posterior of a curve under every law that its data allow."""
    grids = tuple(posterior(law, curve, priors) for law in laws_for(curve.offered))
    return Uptake(curve=curve, priors=priors, grids=grids, law_weights=_weights(grids))


def _weights(grids: Sequence[Grid]) -> tuple[float, ...]:
    evidence = np.array([grid.log_evidence for grid in grids])
    weights = np.exp(evidence - evidence.max())
    return tuple(float(weight) for weight in weights / weights.sum())


def interval(values: Floats, weights: Floats) -> Interval:
    """Return mean, median and central 95 % of weighted values (nodes,); weights add up to 1."""
    low, median, high = quantiles(values, weights, (_TAIL, 0.5, 1.0 - _TAIL))
    return Interval(float(np.dot(weights, values)), median, low, high)


def quantiles(values: Floats, weights: Floats, at: Sequence[float]) -> list[float]:
    """Return quantiles of weighted values (nodes,).

    Values equal to 9 digits are one, so that the step of the grid, and not the number of its nodes
    at one value, is what is interpolated. A value with a mass of its own is met exactly.
    """
    order = np.argsort(values)
    x, mass = values[order], weights[order]
    fresh = np.concatenate([[True], np.diff(x) > 1e-9 * np.abs(x[1:])])
    group = np.cumsum(fresh) - 1
    together = np.bincount(group, mass)
    middle = np.cumsum(together) - 0.5 * together
    found = []
    for p in at:
        holds = int(np.searchsorted(np.cumsum(together), p))
        heavy = together[min(holds, len(together) - 1)] > 0.05
        nearest = x[fresh][min(holds, len(together) - 1)]
        found.append(float(nearest if heavy else np.interp(p, middle, x[fresh])))
    return found


def three_digits(value: float) -> str:
    """Return a number with three digits that count, never in powers of ten."""
    return np.format_float_positional(value, precision=3, unique=False, fractional=False, trim="-")
