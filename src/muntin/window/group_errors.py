"""The errors that wells share, group by group: how far each plate or bottle is off, by response."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.surrogate.fit import Fit
from muntin.surrogate.group_errors import GroupErrors, inside_errors, joined, scale_errors
from muntin.window.coded import group_numbers, shared_by

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

Array = NDArray[np.float64]


def group_errors(view: Assessment, response: Response) -> pd.DataFrame:
    """Every shared error of a response that has been read, a row a group in order of first wells.

    Columns: by (the columns shared, as "plate and salt"), group (their values), acts ("scale" or
    "inside"), readings (how many share it), error, low, high (posterior median and central 95 %),
    size_low, size_high (central 95 % of a group to come, from the sd of such errors) and unit:
    "% of the reading"; of an inside error "logits" for a fraction, else the response's own. Of the
    engine nuts the fast fit answers, from which it started.
    """
    readings, by = view.study.readings(response.name), shared_by(view.study.definition, response)
    parts = [
        _rows(view, response, readings, acts, number, names)
        for acts, every in (("inside", by.inside), ("scale", by.scale))
        for number, names in enumerate(every)
    ]
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame({"by": []})


def _rows(
    view: Assessment,
    response: Response,
    readings: pd.DataFrame,
    acts: str,
    number: int,
    names: tuple[str, ...],
) -> pd.DataFrame:
    stack = view.stacks[response.name]
    kept = [(f, s) for f, s in zip(stack.fits, stack.shares, strict=True) if s > 0.0]
    law = joined([_law(f, acts, number) for f, _ in kept], np.array([s for _, s in kept]))
    groups = group_numbers(view.study.definition, readings, names)
    first = readings.iloc[np.unique(groups, return_index=True)[1]]
    told = first[list(names)].astype(str).agg(", ".join, axis=1)
    middle, low, high = (law.quantiles(level) for level in (0.5, 0.025, 0.975))
    size = 1.959964 * _size(kept, acts, number)
    relative = acts == "scale" or response.kind == "positive"

    def shown(values: Array) -> Array:
        if acts == "scale":
            return 100.0 * values
        return 100.0 * np.expm1(values) if relative else values

    unit = (
        "% of the reading"
        if relative
        else "logits"
        if response.kind == "fraction"
        else response.unit
    )
    return pd.DataFrame(
        {
            "by": " and ".join(names),
            "group": told.to_numpy(),
            "acts": acts,
            "readings": np.bincount(groups),
            "error": shown(middle),
            "low": shown(low),
            "high": shown(high),
            "size_low": shown(np.array([-size])).item(),
            "size_high": shown(np.array([size])).item(),
            "unit": unit,
        }
    )


def _law(fit: Fit, acts: str, number: int) -> GroupErrors:
    of = scale_errors if acts == "scale" else inside_errors
    return of(fit.model, fit.posterior, number)


def _size(kept: list[tuple[Fit, float]], acts: str, number: int) -> float:
    """Root mean square over the nodes of the sd of such an error: that of a group to come."""
    total = sum(share for _, share in kept)
    square = 0.0
    for fit, share in kept:
        sd = np.exp(fit.theta[:, fit.names.index(f"{acts}_error[{number}]")])
        square += share / total * float(fit.weights @ sd**2)
    return float(np.sqrt(square))
