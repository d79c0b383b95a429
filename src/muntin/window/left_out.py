"""Readings beside what others predict for them: all the others, or the plates before."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.predictions import recorded_predictions
from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.window.coded import code, setting_sd
from muntin.window.new_wells import LEVELS, reading_quantiles
from muntin.window.predicted import Predicted
from muntin.window.probability import Target

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

Array = NDArray[np.float64]
# Two-sided 95 % of a normal law.
_WIDTH = 1.959964


def left_out(view: Assessment, response: Response) -> pd.DataFrame:
    """Every reading of a response beside what all other readings predict for it.

    Columns: plate, well, role, observed, censored (-1 read below, 1 above, else 0), predicted, low
    and high in the user's unit; the range is that of a normal law of the prediction's mean and sd
    on the scale where noise is additive (ln of a positive response), central 95 %.
    """
    stack = view.stacks[response.name]
    loos = [fit.loo for fit in stack.fits]
    mean = stack.shares @ np.stack([loo.mean for loo in loos])
    square = stack.shares @ np.stack([loo.sd**2 + (loo.mean - mean) ** 2 for loo in loos])
    sd = np.sqrt(square)
    three = np.stack([mean - _WIDTH * sd, mean, mean + _WIDTH * sd])
    return _beside(view.study, response, np.exp(three) if response.kind == "positive" else three)


def beforehand(view: Assessment, response: Response) -> pd.DataFrame:
    """The readings of every later plate beside what the plates before it predict for a new plate.

    Columns as those of `left_out`, and recorded; predicted is the median. Where the advice of the
    time has recorded it for all of a plate's readings, at the conditions at which they were run,
    that is told; else the fits are made anew, with the same surrogate and seed, on the plates
    before in the order of the study. No rows where there is one plate, or where the plates before
    have no reading of the response.
    """
    study = view.study
    counting = [p.name for p in study.plates if not p.void]
    then = recorded_predictions(study.folder, study.definition.factor_names)
    then = then[then["response"] == response.name]
    found = []
    for at in range(1, len(counting)):
        kept = _recorded(study, response, then[then["plate"] == counting[at]], counting[at])
        found.append(_next(view, response, counting[:at], counting[at]) if kept is None else kept)
    rows = [table for table in found if table is not None]
    if not rows:
        return _beside(study, response, np.zeros((3, 0)), []).assign(recorded=[])
    return pd.concat(rows, ignore_index=True)


def _recorded(
    study: Study, response: Response, then: pd.DataFrame, plate: str
) -> pd.DataFrame | None:
    """The readings of a plate beside what was recorded for them; None unless it was for all."""
    readings = study.readings(response.name)
    readings = readings[readings["plate"] == plate]
    if readings.empty or then.empty:
        return None
    last: dict[tuple[object, ...], Array] = {}
    names = study.definition.factor_names
    for row in then.to_dict("records"):
        ends = [row[name] for name in ("low", "predicted", "high")]
        last[_key(row[name] for name in ("well", *names))] = np.array(ends, dtype=float)
    targets = [f"{name}_target" for name in names]
    keys = [_key(row) for row in readings[["well", *targets]].itertuples(index=False)]
    if any(key not in last for key in keys):
        return None
    three = np.stack([last[key] for key in keys], axis=1) / response.unit_size
    return _beside(study, response, three, [plate]).assign(recorded=True)


def _key(values: Iterable[Any]) -> tuple[object, ...]:
    """Well and condition; numbers as they were before they went through a table."""
    return tuple(v if isinstance(v, str) else float(f"{v:.9g}") for v in values)


def only(study: Study, plates: list[str]) -> Study:
    """The study as if no other plates had been run."""
    return replace(
        study,
        wells=study.wells[study.wells["plate"].isin(plates)],
        plates=tuple(p for p in study.plates if p.name in plates),
    )


def _next(
    view: Assessment, response: Response, before: list[str], plate: str
) -> pd.DataFrame | None:
    from muntin.window.assessment import assess

    study = view.study
    readings = study.readings(response.name)
    readings = readings[readings["plate"] == plate]
    earlier = only(study, before)
    if readings.empty or earlier.readings(response.name).empty:
        return None
    alone = study.definition.model_copy(update={"responses": (response,)})
    then = assess(replace(earlier, definition=alone), view.surrogate, "fast", view.seed)
    surface = replace(then.surfaces[response.name], cloud=None)
    measured = readings[[f"{n}_measured" for n in study.definition.factor_names]]
    setting = setting_sd(study.definition, readings, measured.to_numpy(dtype=bool))
    X = code(study.definition, readings)
    law = Predicted.of(surface, X, Target(), setting)
    three = reading_quantiles(law, LEVELS)
    return _beside(study, response, three, [plate]).assign(recorded=False)


def _beside(
    study: Study, response: Response, three: Array, plates: list[str] | None = None
) -> pd.DataFrame:
    readings = study.readings(response.name)
    if plates is not None:
        readings = readings[readings["plate"].isin(plates)]
    low, middle, high = three * response.unit_size
    table = pd.DataFrame(
        {
            "plate": readings["plate"].to_numpy(),
            "well": readings["well"].to_numpy(),
            "role": readings["role"].to_numpy(),
            "observed": readings["y"].to_numpy(dtype=float) * response.unit_size,
            "censored": readings["censored"].to_numpy(dtype=int),
        }
    )
    return table.assign(predicted=middle, low=low, high=high)
