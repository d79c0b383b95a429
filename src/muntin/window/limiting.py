"""Which response gives way first: at conditions, and beyond each side of a window's ranges."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.factors import Factor
from muntin.window.predicted import Predicted
from muntin.window.probability import Target

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment
    from muntin.window.window import Window

Array = NDArray[np.float64]
End = Literal["low", "high"]
ENDS: tuple[End, End] = ("low", "high")


@dataclass(frozen=True, kw_only=True)
class Side:
    """One side of a window's ranges.

    factor, end: which. at: the last level of the ranges there. beyond: the next level of the grid,
    where a condition that the ranges would take in lies outside the window; None where the tested
    range ends or only a limit is in the way. At the worst of these conditions `response` is the
    judged one least likely to be met, with its probability, and `fails`, "low" or "high", the
    likelier way; None where there is nothing beyond.
    """

    factor: str
    end: End
    at: float
    beyond: float | None = None
    response: str | None = None
    probability: float | None = None
    fails: str | None = None


def limiting(view: Assessment, frame: pd.DataFrame) -> pd.DataFrame:
    """The judged response least likely to be met at valid conditions, row by row.

    Columns: response, probability (of the kind that the study is judged by), fails.
    """
    by = view.study.definition.judged_by
    settings: Iterable[tuple[float, pd.DataFrame]]
    settings = view.settings(frame) if by == "kept" else [(1.0, frame)]
    chances = [
        [weight * _chances(p, by) for p in view.predicted(moved).values()]
        for weight, moved in settings
    ]
    met, under, over = np.moveaxis(np.sum(chances, axis=0), 1, 0)
    least, rows = met.argmin(axis=0), np.arange(len(frame))
    names = np.array([*view.predicted(frame)], dtype=object)
    return pd.DataFrame(
        {
            "response": names[least],
            "probability": met[least, rows],
            "fails": np.where(under >= over, "low", "high")[least, rows],
        }
    )


def _chances(predicted: Predicted, by: str) -> Array:
    """Chances (3, n) to meet the target, to lie below it and to lie above it."""

    def met(target: Target) -> Array:
        if by == "mean":
            return predicted.process_met(target)
        return predicted.met(target)

    target = predicted.target
    never = np.zeros(predicted.moments[0].shape[1])
    under = met(Target(high=target.low)) if np.isfinite(target.low) else never
    over = met(Target(low=target.high)) if np.isfinite(target.high) else never
    return np.stack([met(target), under, over])


def sides_of(view: Assessment, window: Window) -> tuple[Side, ...]:
    """Every side of the window's ranges, factor by factor; none where there are no ranges."""
    if window.ranges is None:
        return ()
    factors = [f for f in view.study.definition.factors if f.continuous]
    return tuple(_side(view, window, factor, end) for factor in factors for end in ENDS)


def _side(view: Assessment, window: Window, factor: Factor, end: End) -> Side:
    ranges = {} if window.ranges is None else window.ranges
    last = float(np.asarray(ranges[factor.name], dtype=float)[ENDS.index(end)])
    levels = np.unique(window.grid[factor.name].to_numpy(dtype=float))
    further = levels[levels < last][-1:] if end == "low" else levels[levels > last][:1]
    slab = _slab(view, window, factor.name, further)
    if slab["inside"].all():
        return Side(factor=factor.name, end=end, at=last)
    worst = slab.loc[[slab["probability"].idxmin()], [*view.study.definition.factor_names]]
    found = limiting(view, worst).iloc[0]
    return Side(
        factor=factor.name,
        end=end,
        at=last,
        beyond=float(further[0]),
        response=str(found["response"]),
        probability=float(found["probability"]),
        fails=str(found["fails"]),
    )


def _slab(view: Assessment, window: Window, moved: str, levels: Array) -> pd.DataFrame:
    """Conditions of the grid at levels of one factor, the others within the ranges."""
    grid, ranges = window.grid, window.ranges or {}
    chosen = grid[moved].isin(levels)
    for factor in view.study.definition.factors:
        if factor.name != moved:
            low, high = ranges[factor.name]
            column = grid[factor.name]
            chosen &= (column >= low) & (column <= high) if factor.continuous else column == low
    return grid[chosen]
