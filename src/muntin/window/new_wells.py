"""What one new well on a new plate may read: quantiles of its law."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.readings import INFORMING
from muntin.record.responses import Response
from muntin.window.coded import code, setting_sd
from muntin.window.predicted import Predicted
from muntin.window.probability import Target, process_quantile

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

Array = NDArray[np.float64]
# Limits at which the law is asked, and nodes that answer.
_LIMITS, _NODES = 120, 64
_SDS = 6.0
_LEAST = 1e-9
LEVELS = (0.025, 0.5, 0.975)


def reading_quantiles(predicted: Predicted, levels: Sequence[float]) -> Array:
    """Quantiles (L, n) of a new well's reading at n conditions, natural unit.

    The law is asked at limits over its whole reach, evenly spaced (of a positive response on the
    logarithm), and interpolated between them in normal scores. Shared errors, noise and setting
    errors count.
    """
    from scipy.special import ndtri

    limits = _limits(predicted)
    below = np.stack([predicted.met(Target(high=float(limit))) for limit in limits])
    scale = np.log(limits) if predicted.surface.link == "log" else limits
    out, asked = np.empty((len(levels), below.shape[1])), ndtri(np.asarray(levels))
    for column, p in enumerate(np.clip(below.T, _LEAST, 1.0 - _LEAST)):
        # On the scale of normal scores a law is nearly straight between two limits.
        out[:, column] = np.interp(asked, np.maximum.accumulate(ndtri(p)), scale)
    return np.exp(out) if predicted.surface.link == "log" else out


def _limits(predicted: Predicted) -> Array:
    """Limits (_LIMITS,) beyond which hardly any reading lies, at any of the conditions."""
    surface, moments = predicted.surface, predicted.moments
    errors = surface.errors
    low, high = (process_quantile(surface, moments, level) for level in (1e-4, 1.0 - 1e-4))
    noise, scale = errors.noise.max(), np.sqrt((errors.scale**2).sum(1)).max()
    if surface.link == "logit":
        return np.linspace(-_SDS * noise, 1.0 + _SDS * np.hypot(noise, scale), _LIMITS)
    more = errors.noise**2 + (errors.inside**2).sum(1)
    wander = 0.0 if predicted.wander is None else predicted.wander.max(initial=0.0)
    reach = _SDS * np.sqrt(more.max() + wander)
    if surface.link == "log":
        ends = np.log(low.min()) - reach, np.log(high.max()) + reach
        return np.asarray(np.exp(np.linspace(*ends, _LIMITS)))
    return np.linspace(low.min() - reach, high.max() + reach, _LIMITS)


def new_wells(
    view: Assessment, response: Response, frame: pd.DataFrame, levels: Sequence[float]
) -> Array:
    """Quantiles (L, n) of a new well's reading of a response at valid conditions (raw units), in
    the user's unit; on a few nodes, as no interval needs more.
    """
    definition = view.study.definition
    surface = view.surfaces[response.name].lightened(_NODES)
    law = Predicted.of(
        replace(surface, cloud=None),
        code(definition, frame),
        Target(),
        setting_sd(definition, frame),
    )
    return reading_quantiles(law, levels) * response.unit_size


def planned_readings(view: Assessment, wells: pd.DataFrame) -> pd.DataFrame:
    """What the wells of a plan are expected to read, a row a well to run and response read so far.

    wells: well, role and the factors (raw units). Columns: well, response, low, predicted and high:
    median and central 95 % of a new well on a new plate, in the user's unit.
    """
    run = wells[wells["role"].isin(INFORMING)]
    names = [*view.study.definition.factor_names]
    parts = []
    for response in view.study.definition.responses:
        if response.name in view.stacks and len(run):
            frame = run[names].reset_index(drop=True)
            low, middle, high = new_wells(view, response, frame.infer_objects(), LEVELS)
            table = pd.DataFrame({"well": run["well"].to_numpy(), "response": response.name})
            parts.append(table.assign(low=low, predicted=middle, high=high))
    columns = ["well", "response", "low", "predicted", "high"]
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame(columns=columns)
