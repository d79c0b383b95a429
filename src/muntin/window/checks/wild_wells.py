"""Readings far from what the others predict, and what excluding them would change."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.surrogate.fit import Stack
from muntin.window.checks.check import Check
from muntin.window.grid import judged_grid

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_WILD = 3.5
_NAMED = 5
# Conditions judged; each many times over where factors are kept within a tolerance.
_GRID, _GRID_KEPT = 500, 144


def wild_wells(
    view: Assessment, response: Response, wild: Index, without: Stack | None
) -> list[Check]:
    """Readings more than 3.5 sds from what the others predict; named, never excluded.

    wild: their rows; without: the fits without them, which say what excluding them would change.
    """
    if not len(wild):
        sentence = f"{response.label}: no wild wells."
        return [Check("wild wells", True, False, sentence, response.name)]
    readings = view.study.readings(response.name)
    places = [f"{readings['plate'].iloc[i]} {readings['well'].iloc[i]}" for i in wild[:_NAMED]]
    more = f" and {len(wild) - _NAMED} more" if len(wild) > _NAMED else ""
    change = _change(view, response, without, len(wild))
    sentence = (
        f"{response.label}: far from what the others predict: {', '.join(places)}{more}{change}; "
        "look for a cause, and exclude only with one."
    )
    return [Check("wild wells", False, False, sentence, response.name)]


def wild_rows(view: Assessment, response: Response, stack: Stack) -> Index:
    """Rows (n,) of the wild readings; a censored one has no place and is none.

    Wild is what lies far off in predictive sds and is as unlikely as that for a normal law: the
    predictive law of few readings has heavier tails, in which sound ones lie.
    """
    from scipy.special import ndtri

    readings = view.study.readings(response.name)
    y = readings["y"].to_numpy(dtype=float)
    y = np.log(y) if response.kind == "positive" else y
    loos = [fit.loo for fit in stack.fits]
    mean = stack.shares @ np.stack([loo.mean for loo in loos])
    square = stack.shares @ np.stack([loo.sd**2 + (loo.mean - mean) ** 2 for loo in loos])
    pit = stack.shares @ np.stack([loo.pit for loo in loos])
    z, score = (y - mean) / np.sqrt(square), ndtri(np.clip(pit, 1e-12, 1.0 - 1e-12))
    return np.flatnonzero(np.minimum(np.abs(z), np.abs(score)) > _WILD)


def _change(view: Assessment, response: Response, without: Stack | None, count: int) -> str:
    """What the fits without the wild readings say of the window."""
    if not response.judged or without is None:
        return ""
    other = replace(
        view,
        stacks={**view.stacks, response.name: without},
        surfaces={**view.surfaces, response.name: without.surface},
    )
    (share, best), (new_share, new_best) = _standing(view), _standing(other)
    it = "it" if count == 1 else "them"
    if share or new_share:
        new, now = _percent(new_share), _percent(share)
        change = f"the window would be {new} of the range instead of {now}"
        if new == now:
            change = f"the window stays {now} of the range"
    else:
        change = f"the best condition would have {new_best:.2f} instead of {best:.2f}"
    return f" (without {it} {change})"


def _standing(view: Assessment) -> tuple[float, float]:
    """Share of the range in the window, and the highest judged probability, on a coarse grid."""
    definition = view.study.definition
    grid, _ = judged_grid(definition, _GRID_KEPT if definition.judged_by == "kept" else _GRID)
    judged = view.judged(grid, definition.judged_by)
    return float((judged >= definition.required_probability).mean()), float(judged.max())


def _percent(share: float) -> str:
    return f"{100 * share:.0f} %"
