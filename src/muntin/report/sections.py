"""What is known along one factor, the others held at the set point."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from muntin.record.factors import Factor
from muntin.record.responses import Response
from muntin.report.slices import few_levels
from muntin.report.words import joined, setting_text
from muntin.window.assessment import Assessment
from muntin.window.new_wells import new_wells

_ENDS = (0.025, 0.975)


def factor_named(view: Assessment, name: str | None) -> Factor:
    """Return a factor of the study, the first where None. Raises ValueError for another name."""
    factors = view.study.definition.factors
    for factor in factors:
        if name in (None, factor.name):
            return factor
    raise ValueError(f"{name!r} is no factor; there are {', '.join(f.name for f in factors)}")


def response_named(view: Assessment, name: str | None) -> Response:
    """Return a response that has been read, the first judged one where None. Raises ValueError for
    another name, or where nothing was read.
    """
    read = [r for r in view.study.definition.responses if r.name in view.stacks]
    if not read:
        raise ValueError("nothing has been read yet")
    if name is None:
        return next((r for r in read if r.judged), read[0])
    for response in read:
        if response.name == name:
            return response
    raise ValueError(f"{name!r} is no response with readings; there are {_names(read)}")


def _names(read: list[Response]) -> str:
    return ", ".join(r.name for r in read)


def section(view: Assessment, factor: Factor, new: bool = True) -> pd.DataFrame:
    """Return levels of a factor, the others held at the set point, with all that is known there.

    Columns: the factors, those of `Assessment.at`, probability (the judged one, of the
    responses read so far) and, with `new`, r_new_low and r_new_high of each response read (central
    95 % of a new well on a new plate). Where the study's limits forbid a condition all are NaN.
    """
    definition = view.study.definition
    set_point = view.window().setpoint
    levels = few_levels(factor)
    held = {f.name: [set_point[f.name]] * len(levels) for f in definition.factors}
    frame = pd.DataFrame({**held, factor.name: levels})
    known = view.at(frame)
    known["probability"] = view.judged(frame, definition.judged_by)
    for response in definition.responses if new else ():
        if response.name in view.stacks:
            low, high = new_wells(view, response, frame, _ENDS)
            known = known.assign(
                **{f"{response.name}_new_low": low, f"{response.name}_new_high": high}
            )
    known.loc[~definition.allowed(frame), :] = np.nan
    return frame.join(known)


def held_text(view: Assessment, factor: Factor) -> str:
    """Return where the other factors are held, as "pH 5.6 and Salt 250 mM"; "" without others."""
    set_point = view.window().setpoint
    others = [f for f in view.study.definition.factors if f.name != factor.name]
    return joined([setting_text(f, set_point[f.name]) for f in others])


def best_word(view: Assessment) -> str:
    """Return what the window's best condition is: "set point", or "best so far" outside it."""
    return "set point" if view.window().share else "best so far"


def held_line(view: Assessment, factor: Factor) -> str:
    """Return "Held at the set point: Salt 250 mM", or "" where nothing else is varied."""
    best = "set point" if view.window().share else "best condition so far"
    held = held_text(view, factor)
    return f"Held at the {best}: {held}" if held else ""


def place(factor: Factor, values: Any) -> Any:
    """Return where values of a factor stand on its axis: themselves, or the numbers of choices."""
    if factor.continuous:
        return np.asarray(values, dtype=float)
    number = {choice: i for i, choice in enumerate(factor.choices or ())}
    return np.array([number[v] for v in values], dtype=float)


def wells_near(view: Assessment, response: Response, factor: Factor) -> pd.DataFrame:
    """Return the readings of a response whose other factors lie at the set point, to half a bench
    step: the columns of `Study.readings`, y in the user's unit.
    """
    readings, set_point = view.study.readings(response.name), view.window().setpoint
    for other in view.study.definition.factors:
        if other.name == factor.name:
            continue
        if other.continuous:
            away = (readings[other.name].astype(float) - set_point[other.name]).abs()
            readings = readings[away <= 0.5 * other.span[2] + 1e-9]
        else:
            readings = readings[readings[other.name] == set_point[other.name]]
    return readings.assign(y=readings["y"] * response.unit_size)
