"""How sure it is that a box holds everywhere at once, and the largest part of it that is."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from muntin.window.boxes import Span
from muntin.window.everywhere import Everywhere
from muntin.window.largest import Bools, over_spans, spans_of
from muntin.window.steps import Steps, evenly, grid_of

Array = NDArray[np.float64]
Index = NDArray[np.intp]
# Steps a factor at which the draws are asked, by the number of factors with a range.
_LEVELS = (0, 61, 16, 8, 5, 4, 3)


def asked_levels(span: Span, at: Index | None) -> list[Index]:
    """Steps of each factor at which a span is asked: its ends, `at` where it lies in the span, and
    others evenly between.
    """
    most = _LEVELS[len(span.low)]
    held = [None] * len(span.low) if at is None else at.tolist()
    ends = zip(span.low.tolist(), span.high.tolist(), held, strict=True)
    return [evenly(low, high, most, here) for low, high, here in ends]


def holding_everywhere(
    everywhere: Everywhere, steps: Steps, levels: Sequence[Index]
) -> tuple[Bools, Bools]:
    """Whether (N, k_1, ..., k_F) each drawn process holds at the levels: by what the study is
    judged by, and by its mean.
    """
    frame = steps.frame(grid_of(levels))
    shape = [len(n) for n in levels]
    ok, mean = (everywhere.margin(frame, by) >= 0.0 for by in (None, "mean"))
    return ok.reshape(-1, *shape), mean.reshape(-1, *shape)


def assurance_of(ok: Bools) -> float:
    """Share of the drawn processes (N, k_1, ..., k_F) that hold at every level at once."""
    return float(ok.reshape(len(ok), -1).all(axis=1).mean())


def assured_span(
    ok: Bools, steps: Steps, levels: Sequence[Index], asked: float, holding: Index | None
) -> Span | None:
    """The largest span of the levels at all of which at once as large a share of the drawn
    processes ok (N, k_1, ..., k_F) holds as is asked; None where there is none. holding (F,): steps
    that it must hold. Every span there is is looked at.
    """
    draws = len(ok)
    packed = np.moveaxis(np.packbits(ok, axis=0), 0, -1)
    size: Array = np.ones(())
    found = []
    for axis, at in enumerate(levels):
        held = None if holding is None else int(np.flatnonzero(at == holding[axis])[0])
        spans = spans_of(len(at), held)
        packed = over_spans(packed, axis, spans)
        size = np.multiply.outer(size, steps.axis(axis, at).size(*spans))
        found.append(spans)
    held_by = np.bitwise_count(packed).sum(axis=-1, dtype=np.int64)
    size = np.where(held_by >= asked * draws - 1e-9, size, -1.0)
    if size.max() < 0.0:
        return None
    best = np.flatnonzero(size.ravel() >= size.max() * (1.0 - 1e-9))
    # Of spans of one size that which most draws hold in.
    best = best[np.argmax(held_by.ravel()[best])]
    picked = np.unravel_index(best, size.shape)
    ends = [
        (at[first[i]], at[last[i]])
        for at, (first, last), i in zip(levels, found, picked, strict=True)
    ]
    return Span(*np.array(ends, dtype=np.intp).reshape(len(levels), 2).T)
