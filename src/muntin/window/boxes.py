"""The largest box of factor ranges in which every bench step reaches the required probability.

Where the nodes of a grid are all bench steps, the largest box of the grid is it. Where they are
fewer, that box is settled: judged at its corners, at the middles of its sides, at bench steps
between the nodes and down the slope from the weakest of them, cut where one of these fails, and its
sides moved out to the last step that holds.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from muntin.window.largest import Bools, largest_box
from muntin.window.steps import Condition, Judged, Steps, corners, grid_of, whole

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Ranges = dict[str, tuple[object, object]]
# Of a box or a slab of so many bench steps every one is judged, else so many scattered ones.
_EVERY, _SCATTER, _SLAB_EVERY, _SLAB_SCATTER = 1500, 256, 160, 16
_ROUNDS = 40
# Weakest steps of a box from which the surface is followed down.
_WAYS = 6


@dataclass(frozen=True, kw_only=True)
class Box:
    """Factor ranges that hold together, raw units; a choice is held (low and high are the same).

    least, least_at: the lowest judged probability in them and its condition. assurance:
    probability that what the study is judged by holds at every condition of the box at once (the
    process mean meets all targets; or, of wells, the share of new wells that pass reaches the
    required probability). mean_everywhere: probability that the process mean meets all targets at
    every condition at once. share: of the factors' ranges, choices held. conditions: how many were
    judged one by one; every: whether these are all its bench steps.
    """

    ranges: Ranges
    least: float
    least_at: Condition
    assurance: float
    mean_everywhere: float
    share: float
    conditions: int
    every: bool


@dataclass(frozen=True, eq=False)
class Span:
    """First and last bench step of each factor (F,), as indices."""

    low: Index
    high: Index

    @property
    def size(self) -> int:
        """Bench steps in it."""
        return int(np.prod((self.high - self.low + 1).astype(float)))

    def holds(self, index: Index) -> Bools:
        """Which indices (n, F) lie in it."""
        return np.asarray(((index >= self.low) & (index <= self.high)).all(axis=-1))


def share_of(steps: Steps, span: Span) -> float:
    """Share of the factors' ranges, on their scales, that a span takes up, by its steps."""
    parts = []
    for axis, (low, high) in enumerate(zip(span.low, span.high, strict=True)):
        whole_axis = steps.axis(axis)
        parts.append(float(whole_axis.size(low, high) / (1.0 + whole_axis.step)))
    return float(np.prod(parts))


def ranges_of(steps: Steps, span: Span) -> Ranges:
    """The ranges of a span, raw units, in the order of the factors."""
    low, high = steps.condition(span.low), steps.condition(span.high)
    return {name: (low[name], high[name]) for name in low}


def largest_span(
    judged: Judged, required: float, nodes: Sequence[Index], holding: Index | None = None
) -> Span | None:
    """The largest span of a grid of nodes, a list of steps a factor, that were judged before, and
    in which all reach the required probability; None where none does. holding (F,): a node that
    it must hold.
    """
    index = grid_of(nodes)
    inside = np.array([judged.known.get(tuple(row), 0.0) >= required for row in index.tolist()])
    axes = [judged.steps.axis(axis, n) for axis, n in enumerate(nodes)]
    held = None
    if holding is not None:
        held = [int(np.flatnonzero(n == at)[0]) for n, at in zip(nodes, holding, strict=True)]
    found = largest_box(inside.reshape([len(n) for n in nodes]), axes, held)
    if found is None:
        return None
    ends = [(n[first], n[last]) for n, (first, last) in zip(nodes, found, strict=True)]
    return Span(*np.array(ends, dtype=np.intp).reshape(len(nodes), 2).T)


def settled(
    judged: Judged, required: float, span: Span, nodes: Sequence[Index], holding: Index | None
) -> Span | None:
    """The span with its sides moved out between the nodes, and cut until no step that is judged in
    it fails; None where nothing is left of it.
    """
    kept = _cut(judged, required, span, holding)
    if kept is None:
        return None
    for axis, end in _sides(judged.steps, kept):
        kept = _moved_out(judged, required, kept, nodes[axis], axis, end)
    return _cut(judged, required, kept, holding)


def probes(span: Span, every: int = _EVERY, scatter: int = _SCATTER) -> Index:
    """Indices (n, F) at which a span is judged: all of them where they are at most so many, else
    corners, middles of sides, and scattered ones.
    """
    if span.size <= every:
        return whole(span.low, span.high)
    from scipy.stats.qmc import Sobol

    middle = (span.low + span.high) // 2
    faces = np.repeat(middle[None], 2 * len(middle), axis=0)
    for axis in range(len(middle)):
        faces[2 * axis, axis], faces[2 * axis + 1, axis] = span.low[axis], span.high[axis]
    sobol = Sobol(len(middle), rng=np.random.default_rng(0))
    unit = sobol.random_base2(int(np.ceil(np.log2(scatter))))
    inner = span.low + (unit * (span.high - span.low + 1)).astype(np.intp)
    return np.unique(np.concatenate([corners(span.low, span.high), faces, inner]), axis=0)


def _cut(judged: Judged, required: float, span: Span, holding: Index | None) -> Span | None:
    """The span less what fails at its probes; each cut leaves as much of it as can be."""
    for _ in range(_ROUNDS):
        judged(probes(span))
        _descend(judged, span)
        index, p = judged.within(span.low, span.high)
        bad = index[p < required][np.argsort(p[p < required], kind="stable")]
        if not len(bad):
            return span
        while len(bad):
            cuts = _cuts(span, bad[0], holding)
            if not cuts:
                return None
            span = max(cuts, key=lambda cut: share_of(judged.steps, cut))
            bad = bad[span.holds(bad)]
    return None


def _descend(judged: Judged, span: Span) -> None:
    """Judge the way down from the weakest steps of a span, one step at a time, to where no
    neighbour is weaker: a smooth surface that fails between what was judged fails there.
    """
    ways = np.eye(len(span.low), dtype=np.intp)
    ways = np.concatenate([ways, -ways])
    index, p = judged.within(span.low, span.high)
    at, height = index[np.argsort(p, kind="stable")[:_WAYS]], np.sort(p)[:_WAYS]
    for _ in range(_ROUNDS):
        near = np.clip(at[:, None] + ways, span.low, span.high)
        around = judged(near.reshape(-1, len(span.low))).reshape(near.shape[:2])
        lower = around.min(axis=1, initial=np.inf) < height
        if not lower.any():
            return
        at, height = near[lower, around[lower].argmin(axis=1)], around[lower].min(axis=1)


def _cuts(span: Span, bad: Index, holding: Index | None) -> list[Span]:
    """The spans that leave one index out by moving one side past it."""
    out = []
    for axis, at in enumerate(bad):
        for low, high in ((span.low[axis], at - 1), (at + 1, span.high[axis])):
            if low > high or (holding is not None and not low <= holding[axis] <= high):
                continue
            ends = Span(span.low.copy(), span.high.copy())
            ends.low[axis], ends.high[axis] = low, high
            out.append(ends)
    return out


def _sides(steps: Steps, span: Span) -> list[tuple[int, int]]:
    """Sides (axis, -1 or 1), those of the narrowest axes first, where a step gains most."""
    coded = [steps.coded(axis) for axis in range(len(steps.levels))]
    width = [c[high] - c[low] for c, low, high in zip(coded, span.low, span.high, strict=True)]
    order = np.argsort(width, kind="stable")
    return [(int(axis), end) for axis in order for end in (-1, 1)]


def _moved_out(
    judged: Judged, required: float, span: Span, nodes: Index, axis: int, end: int
) -> Span:
    """The span with one side moved out, by bisection, to the last step before the next node at
    which all that is judged holds.
    """
    here = int(span.low[axis] if end < 0 else span.high[axis])
    beyond = nodes[nodes < here] if end < 0 else nodes[nodes > here]
    last = int(judged.steps.counts[axis]) - 1
    far = (int(beyond.max()) if end < 0 else int(beyond.min())) if len(beyond) else here
    far = min(max(far, 0), last)
    while here != far:
        middle = here + (far - here + end) // 2 if end > 0 else here - (here - far + 1) // 2
        slab = Span(span.low.copy(), span.high.copy())
        slab.low[axis] = slab.high[axis] = middle
        if (judged(probes(slab, _SLAB_EVERY, _SLAB_SCATTER)) >= required).all():
            here = middle
            ends = Span(span.low.copy(), span.high.copy())
            (ends.low if end < 0 else ends.high)[axis] = here
            span = ends
        else:
            far = middle - end
    return span
