"""The largest box of a grid in which every node is inside."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import reduce
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Bools = NDArray[np.bool_]
Index = NDArray[np.intp]
Spans = tuple[tuple[int, int], ...]
_TIE = 1e-9
_CHUNK = 4_000_000


@dataclass(frozen=True, eq=False)
class Axis:
    """Places of the nodes (k,), ascending, and the step that a node counts for by itself."""

    nodes: Array
    step: float

    def size(self, first: Index, last: Index) -> Array:
        """Size (m,) of spans from first to last nodes (m,): their width and one step."""
        return np.asarray(self.nodes[last] - self.nodes[first] + self.step)


def largest_box(
    inside: Bools, axes: Sequence[Axis], holding: Sequence[int] | None = None
) -> Spans | None:
    """First and last node on each axis of the largest box, exactly; None where there is none.

    inside (k_1, ..., k_F): whether a node may lie in it. axes: where its nodes lie. holding: a node
    that the box must hold. Of boxes of one size that which begins at the lowest nodes is taken.

    Every box there is is looked at: per axis the AND over each of its k (k + 1) / 2 spans is that
    over the span one node shorter and one node more, so N nodes make about N^2 / 2^F booleans.
    """
    good, spans, sizes = inside, [], []
    for axis, at in enumerate(axes):
        found = spans_of(len(at.nodes), None if holding is None else holding[axis])
        good = over_spans(good, axis, found)
        spans.append(found)
        sizes.append(at.size(*found))
    largest, place = 0.0, -1
    for start, size in _sizes(good, sizes):
        # Sums that differ by rounding only are of one size.
        if size.max() > largest * (1.0 + _TIE):
            largest = float(size.max())
            place = start + int(np.flatnonzero(size >= largest * (1.0 - _TIE))[0])
    if place < 0:
        return None
    picked = np.unravel_index(place, good.shape)
    return tuple((int(s[0][i]), int(s[1][i])) for s, i in zip(spans, picked, strict=True))


def _sizes(good: Bools, sizes: Sequence[Array]) -> Iterator[tuple[int, Array]]:
    """Sizes of the boxes, -1 where one may not be, in order, some of them at a time, with the place
    of the first among all.
    """
    if not sizes:
        yield 0, np.where(good.ravel(), 1.0, -1.0)
        return
    rest = reduce(np.multiply.outer, sizes[1:], np.ones(()))
    rows = max(1, _CHUNK // rest.size)
    for start in range(0, len(good), rows):
        some = slice(start, start + rows)
        size = np.where(good[some], np.multiply.outer(sizes[0][some], rest), -1.0)
        yield start * rest.size, size.ravel()


def spans_of(nodes: int, holding: int | None = None) -> tuple[Index, Index]:
    """First and last nodes (m,) of every span of an axis, or of those that hold a node."""
    first, last = np.triu_indices(nodes)
    if holding is None:
        return first, last
    keep = (first <= holding) & (last >= holding)
    return first[keep], last[keep]


def over_spans(values: NDArray[Any], axis: int, spans: tuple[Index, Index]) -> NDArray[Any]:
    """The bitwise AND over each span of an axis, which then runs over the spans (m,)."""
    moved = np.moveaxis(values, axis, 0)
    first, last = spans
    out = np.empty((len(first), *moved.shape[1:]), dtype=values.dtype)
    # running[i] is the AND from node i over so many nodes.
    running = moved
    for length in range(len(moved)):
        if length:
            running = running[:-1] & moved[length:]
        rows = np.flatnonzero(last - first == length)
        out[rows] = running[first[rows]]
    return np.moveaxis(out, 0, axis)
