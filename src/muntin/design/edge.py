"""Wells that tell most about the edge of the window.

The criterion is the expected variance of the verdict, E[P (1 - P)], left after the batch, averaged
over the judged points; P is the joint probability over the responses, independent given x.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.design.excursion import expected_square
from muntin.design.outlook import Outlook
from muntin.window.probability import Target

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_BLOCK = 2_000_000


@dataclass(frozen=True)
class EdgeCriterion:
    """The expected variance of the verdict at the watched points of some outlooks.

    outlooks and targets: one a judged response, all over the same points and candidates.
    """

    outlooks: tuple[Outlook, ...]
    targets: tuple[Target, ...]

    def now(self) -> float:
        """Mean over the watched points of E[P^2] with the picks so far; more is better."""
        squares = [
            self._square(o, t, o.explained[:, o.watched, None])
            for o, t in zip(self.outlooks, self.targets, strict=True)
        ]
        return float(np.prod(squares, axis=0).mean())

    def with_one(self, wells: Index) -> Array:
        """The same (k,) with one more well at each of some candidates."""
        nodes = max(len(o.mean) for o in self.outlooks)
        size = max(1, _BLOCK // (nodes * max(1, len(self.outlooks[0].watched))))
        parts = [self._block(wells[i : i + size]) for i in range(0, len(wells), size)]
        return np.concatenate(parts) if parts else np.zeros(0)

    def _block(self, wells: Index) -> Array:
        squares = [
            self._square(o, t, o.after(wells))
            for o, t in zip(self.outlooks, self.targets, strict=True)
        ]
        return np.asarray(np.prod(squares, axis=0).mean(axis=0))

    @staticmethod
    def _square(outlook: Outlook, target: Target, explained: Array) -> Array:
        """E[p1^2] (P, k), averaged over nodes, from explained variance (S, P, k)."""
        mean, variance = outlook.mean[:, outlook.watched], outlook.variance[:, outlook.watched]
        sd = np.sqrt(variance)
        low = ((outlook.surface.thresholds(target.low) - mean) / sd)[..., None]
        high = ((outlook.surface.thresholds(target.high) - mean) / sd)[..., None]
        rho = np.clip(explained / variance[..., None], 0.0, 1.0 - 1e-9)
        return np.asarray(
            np.tensordot(outlook.surface.weights, expected_square(low, high, rho), axes=1)
        )


class LazyGreedy:
    """One pick at a time; gains of earlier rounds say where to look first (Minoux 1978).

    That earlier gains bound later ones holds only nearly here: a pick can make one beside it worth
    more. What is lost to an exhaustive search stays within a few per cent of a pick's gain.
    """

    def __init__(self, criterion: EdgeCriterion, count: int) -> None:
        self.criterion = criterion
        self.bound = np.full(count, np.inf)

    def best(self, open_wells: NDArray[np.bool_], batch: int = 24) -> int:
        """The candidate (among the open ones) whose reading is worth most now."""
        now = self.criterion.now()
        fresh = np.zeros(len(self.bound), dtype=bool)
        order = np.flatnonzero(open_wells)
        order = order[np.argsort(-self.bound[order], kind="stable")]
        size = len(order) if np.isinf(self.bound[order]).any() else batch
        best, start = -np.inf, 0
        while start < len(order) and self.bound[order[start]] > best:
            wells = order[start : start + size]
            self.bound[wells] = self.criterion.with_one(wells) - now
            fresh[wells] = True
            best = max(best, float(self.bound[wells].max()))
            start += size
        tried = np.flatnonzero(fresh)
        return int(tried[np.argmax(self.bound[tried])])
