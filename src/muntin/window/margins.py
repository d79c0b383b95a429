"""Where the edge of a window lies: along lines of conditions on which one factor is moved."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.window.boxes import Span
from muntin.window.everywhere import Everywhere
from muntin.window.limiting import ENDS, End
from muntin.window.steps import Judged, Steps, evenly

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Steps of a line at which it is judged, at which draws are asked, and lines of a table.
_JUDGED, _DRAWN, _LINES = 61, 17, 9
_INTERVAL = (0.025, 0.975)
_SURE = 1e-9


@dataclass(frozen=True, kw_only=True)
class Margin:
    """How far the edge lies from the set point along one factor, the others held there.

    edge: where the judged probability falls to the required one (raw unit), distance: from the set
    point to it (raw unit, not negative); both None where the range ends first, at `end_of_range`.
    limited: whether a limit of the study ends it, with the edge at the last step that it allows.
    """

    factor: str
    end: End
    edge: float | None
    distance: float | None
    end_of_range: float
    limited: bool = False


@dataclass(frozen=True, eq=False)
class Line:
    """Conditions that differ in one factor: its axis, an index (F,) on it, and the steps (k,) of
    the factor, ascending.
    """

    axis: int
    at: Index
    steps: Index

    def indices(self, some: Index | None = None) -> Index:
        """Indices (k, F) of its conditions, or of those at some of the steps."""
        moved = self.steps if some is None else some
        out = np.repeat(self.at[None], len(moved), axis=0)
        out[:, self.axis] = moved
        return out


@dataclass(frozen=True, eq=False)
class Edge:
    """One end of the window on a line: its place (raw unit), and the step in the middle of what is
    inside there.
    """

    line: Line
    end: End
    place: float
    middle: int

    def asked(self, count: int) -> Index:
        """Steps (k,) from the middle to the end of a factor of so many steps, where draws are
        asked.
        """
        stop = 0 if self.end == "low" else count - 1
        ticks = np.linspace(self.middle, stop, min(abs(stop - self.middle) + 1, _DRAWN))
        return np.array([*dict.fromkeys(np.round(ticks).astype(int).tolist())], dtype=np.intp)


@dataclass(frozen=True)
class Crossing:
    """Where the judged probability falls to the required one along a line: at `place` (raw unit),
    between the last step inside and the next; or, if limited, at the last that is allowed.
    """

    place: float
    limited: bool


def line_through(steps: Steps, at: Index, axis: int) -> Line:
    """The line through an index (F,) along one factor: all its steps, or 61 evenly with its own."""
    return Line(axis, at, evenly(0, int(steps.counts[axis]) - 1, _JUDGED, int(at[axis])))


def crossing(judged: Judged, required: float, line: Line, start: int, end: End) -> Crossing | None:
    """The first crossing on the way from a step inside the window to an end of a line; None where
    the line ends first.
    """
    p = judged(line.indices())
    levels = judged.steps.levels[line.axis]
    order = np.flatnonzero(line.steps <= start)[::-1]
    if end == "high":
        order = np.flatnonzero(line.steps >= start)
    out = np.flatnonzero(p[order] < required)
    if not len(out) or not out[0]:
        return None
    last, first = order[out[0] - 1], order[out[0]]
    beyond = judged.steps.frame(line.indices(line.steps[[first]]))
    if not judged.steps.definition.allowed(beyond)[0]:
        return Crossing(float(levels[line.steps[last]]), True)
    heights = _probit(p[[last, first]]) - _probit(np.array([required]))
    ends = levels[line.steps[[last, first]]]
    return Crossing(float(_between(ends[0], ends[1], heights[0], heights[1])), False)


def margins_of(judged: Judged, required: float, at: Index) -> tuple[Margin, ...]:
    """A record for both sides of each factor from a set point at index (F,); none where it lies
    outside the window.
    """
    if judged(at[None])[0] < required:
        return ()
    out = []
    for axis, name in enumerate(judged.steps.names):
        line = line_through(judged.steps, at, axis)
        levels = judged.steps.levels[axis]
        for end in ENDS:
            found = crossing(judged, required, line, int(at[axis]), end)
            edge = None if found is None else found.place
            away = None if edge is None else abs(edge - float(levels[at[axis]]))
            out.append(
                Margin(
                    factor=name,
                    end=end,
                    edge=edge,
                    distance=away,
                    end_of_range=float(levels[0 if end == "low" else -1]),
                    limited=found is not None and found.limited,
                )
            )
    return tuple(out)


def edge_table(
    judged: Judged, required: float, at: Index, span: Span | None, everywhere: Everywhere
) -> pd.DataFrame:
    """Conditions at which the judged probability crosses the required one, a row each.

    Two factors with a range: that of more steps is moved, the other at up to nine levels. More:
    each is moved, the others at the set point, index (F,), and that of most steps also with each
    other factor at the ends of a span. Columns: the factors (raw units, the moved one at the
    crossing); factor, the moved one; end, "low" or "high", the end of the window that it is; low
    and high, the central 95 % of it over the drawn processes, NaN where it lies beyond the line
    or past the middle of what is inside; found, the share of processes that have it on the line.
    """
    steps = judged.steps
    found = [e for line in _lines(steps, at, span) for e in _edges(judged, required, line, at)]
    rows = []
    for edge, drawn in zip(found, _drawn_crossings(everywhere, steps, found), strict=True):
        moved = steps.names[edge.line.axis]
        row = steps.condition(edge.line.at) | {moved: edge.place, "factor": moved, "end": edge.end}
        rows.append(row | _interval(drawn))
    columns = [*steps.definition.factor_names, "factor", "end", "low", "high", "found"]
    return pd.DataFrame(rows, columns=columns)


def _lines(steps: Steps, at: Index, span: Span | None) -> Iterator[Line]:
    count = len(steps.names)
    if not count:
        return
    moved = int(np.argmax(steps.counts))
    if count == 2:
        other = 1 - moved
        for level in evenly(0, int(steps.counts[other]) - 1, _LINES):
            place = at.copy()
            place[other] = level
            yield line_through(steps, place, moved)
        return
    for axis in range(count):
        yield line_through(steps, at, axis)
    for other in range(count if span is not None else 0):
        assert span is not None
        for level in sorted({int(span.low[other]), int(span.high[other])} - {int(at[other])}):
            if other != moved:
                place = at.copy()
                place[other] = level
                yield line_through(steps, place, moved)


def _edges(judged: Judged, required: float, line: Line, at: Index) -> Iterator[Edge]:
    """Where the run of steps inside the window on a line ends with a crossing: the run that holds
    the set point's step, else the longest.
    """
    inside = judged(line.indices()) >= required
    runs = _runs(inside)
    if not runs:
        return
    own = int(np.flatnonzero(line.steps == at[line.axis])[0])
    longest = max(runs, key=lambda run: run[1] - run[0])
    first, last = next((run for run in runs if run[0] <= own <= run[1]), longest)
    middle = int(line.steps[(first + last) // 2])
    for end in ENDS:
        found = crossing(judged, required, line, middle, end)
        if found is not None and not found.limited:
            yield Edge(line, end, found.place, middle)


def _runs(inside: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """First and last positions of each run of True."""
    turned = np.flatnonzero(np.diff(np.concatenate([[False], inside, [False]]).astype(int)))
    return [(int(a), int(b) - 1) for a, b in zip(turned[::2], turned[1::2], strict=True)]


def _drawn_crossings(
    everywhere: Everywhere, steps: Steps, edges: Sequence[Edge]
) -> Iterator[Array]:
    """The place (N,) of each edge in each drawn process, raw unit: the first crossing from the
    middle step to the end; infinite, away from the middle, where the line ends first, and toward
    it where the process is outside at the middle already.
    """
    if not edges:
        return
    asked = [edge.asked(int(steps.counts[edge.line.axis])) for edge in edges]
    parts = [edge.line.indices(some) for edge, some in zip(edges, asked, strict=True)]
    heights = everywhere.margin(steps.frame(np.concatenate(parts)))
    stops = np.cumsum([len(some) for some in asked])[:-1]
    for edge, some, height in zip(edges, asked, np.split(heights, stops, axis=1), strict=True):
        away = -np.inf if edge.end == "low" else np.inf
        yield _first_below(height, steps.levels[edge.line.axis][some], away)


def _first_below(height: Array, levels: Array, away: float) -> Array:
    """Where heights (N, k) first fall below 0 along levels (k,): `away` where they never do, minus
    that where the first is below 0 already.
    """
    outside = height < 0.0
    first = np.where(outside.any(axis=1), outside.argmax(axis=1), -1)
    place = np.where(first == 0, -away, away)
    rows = np.flatnonzero(first > 0)
    j = first[rows]
    place[rows] = _between(levels[j - 1], levels[j], height[rows, j - 1], height[rows, j])
    return place


def _interval(drawn: Array) -> dict[str, float]:
    low, high = np.quantile(drawn, _INTERVAL, method="closest_observation")
    return {
        "low": float(low) if np.isfinite(low) else np.nan,
        "high": float(high) if np.isfinite(high) else np.nan,
        "found": float(np.isfinite(drawn).mean()),
    }


def _between(inner: Array, outer: Array, up: Array, down: Array) -> Array:
    """Place where a straight line from height `up` (not negative) to `down` (negative) is 0."""
    return np.asarray(inner + (outer - inner) * up / (up - down))


def _probit(p: Array) -> Array:
    from scipy.special import ndtri

    return np.asarray(ndtri(np.clip(p, _SURE, 1.0 - _SURE)))
