"""What a repeat is expected to bring: of the wells that looked best, and of the set point.

Two things are chosen because they look best, and they are not alike.

A reading that looked best was partly lucky: it was picked for being high, its noise and its plate's
error included. Given the model, the mean of a new well at its condition is the posterior mean of
the process there, so `read` less `expected` is the drop to expect when it is repeated. It needs no
correction for how many wells it was picked from, since the posterior mean has drawn all readings
in already; it is conditional on the model, its priors and the data.

The probability of a set point that was picked for having the highest one is not biased by the
picking if the model is right: given the data it is an expectation already, whatever is chosen with
them (Dawid 1994, Selection paradoxes of Bayesian inference, from memory). What it can hide is that
the model is not right there, which is most likely where a surface looks best, and which no number
from the same model can tell. Stated are therefore how far the share of new wells that pass may be
from its mean, over joint draws of surface and errors, and a repeat that tests it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.responses import Response
from muntin.window.everywhere import Everywhere
from muntin.window.predicted import Predicted
from muntin.window.probability import Target, process_mean
from muntin.window.steps import Condition, condition_of

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

Array = NDArray[np.float64]
# Wells of the repeat that is proposed: so many that one which fails by chance is seen as chance.
WELLS = 4
_LEVELS = (0.025, 0.975)
_HALVINGS, _FAR = 50, 8.0


@dataclass(frozen=True, kw_only=True)
class Repeat:
    """What repeating a condition is expected to bring, for one response, in the user's unit.

    response: its name. read: the reading that looked best among the wells run (the highest where
    the target is at_least, the lowest where it is at_most), with plate, well and condition.
    expected: posterior mean of the process there; low, high: central 95 % of the reading of a new
    well there, on a new plate. drop: what a repeat is expected to lose of what made it look best.
    """

    response: str
    plate: str
    well: str
    condition: Condition
    read: float
    expected: float
    low: float
    high: float
    drop: float


@dataclass(frozen=True, kw_only=True, eq=False)
class Optimism:
    """What may be too good in a set point chosen because it looked best.

    probability: the judged one of the set point. low, high: central 95 % over the drawn processes
    of the share of new wells that pass there; None where the process mean is judged. best_run: the
    wells that looked best, a record a judged response with one target. wells: repeats proposed at
    the set point on a new plate; expected_passes: how many of them are expected to pass. readings:
    what they may read, a row a judged response: response (name), mean, low, high (process mean,
    central 95 % of one new well; user's unit).
    """

    probability: float
    low: float | None
    high: float | None
    best_run: tuple[Repeat, ...]
    wells: int
    expected_passes: float
    readings: pd.DataFrame


def optimism_of(
    view: Assessment, setpoint: pd.DataFrame, probability: float, everywhere: Everywhere
) -> Optimism:
    """The optimism of a set point, a frame of one row (raw units)."""
    by = view.study.definition.judged_by
    low, high = None, None
    if by != "mean":
        ends = np.quantile(everywhere.share(setpoint)[:, 0], _LEVELS)
        low, high = float(ends[0]), float(ends[1])
    passes = view.judged(setpoint, "well" if by == "mean" else by)
    judged = [r for r in view.study.definition.judged if r.name in view.surfaces]
    readings = [{"response": r.name, **_new_well(view, r, setpoint)} for r in judged]
    return Optimism(
        probability=probability,
        low=low,
        high=high,
        best_run=tuple(r for r in (best_run(view, response) for response in judged) if r),
        wells=WELLS,
        expected_passes=float(WELLS * passes[0]),
        readings=pd.DataFrame(readings, columns=["response", "mean", "low", "high"]),
    )


def best_run(view: Assessment, response: Response) -> Repeat | None:
    """The well that looked best by one response, and what a repeat of it is expected to read; None
    without a reading, or where the target lies between two limits.
    """
    readings = view.study.readings(response.name)
    readings = readings[readings["censored"] == 0]
    at_least, at_most = response.target
    if (at_least is None) == (at_most is None) or readings.empty:
        return None
    sign = 1.0 if at_most is None else -1.0
    best = readings.iloc[int(np.argmax(sign * readings["y"].to_numpy(dtype=float)))]
    names = [*view.study.definition.factor_names]
    there = pd.DataFrame([best[names].to_dict()], columns=names)
    known = _new_well(view, response, there)
    read = float(best["y"]) * response.unit_size
    return Repeat(
        response=response.name,
        plate=str(best["plate"]),
        well=str(best["well"]),
        condition=condition_of(there),
        read=read,
        expected=known["mean"],
        low=known["low"],
        high=known["high"],
        drop=sign * (read - known["mean"]),
    )


def _new_well(view: Assessment, response: Response, there: pd.DataFrame) -> dict[str, float]:
    """Process mean and central 95 % of a new well's reading at one condition, user's unit."""
    predicted = view.predicted(there)[response.name]
    mean = float(process_mean(predicted.surface, predicted.moments)[0])
    low, high = (reading_quantile(predicted, response, level) for level in _LEVELS)
    unit = response.unit_size
    return {"mean": mean * unit, "low": low * unit, "high": high * unit}


def reading_quantile(predicted: Predicted, response: Response, level: float) -> float:
    """Quantile of the reading of a new well at one condition, natural unit, by bisection."""

    def below(y: float) -> float:
        return float(predicted.met(Target(high=y))[0])

    low, high = _bracket(predicted, response)
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        if high - low < 1e-6 * (1.0 + abs(middle)):
            break
        low, high = (middle, high) if below(middle) < level else (low, middle)
    return 0.5 * (low + high)


def _bracket(predicted: Predicted, response: Response) -> tuple[float, float]:
    """Two values (natural unit) that a reading lies between all but surely."""
    surface = predicted.surface
    errors = surface.errors
    wide = float(errors.noise.max() + np.sqrt((errors.scale**2).sum(1)).max(initial=0.0))
    if response.kind == "fraction":
        return -_FAR * wide, 1.0 + _FAR * wide
    mean, variance = predicted.moments[0], predicted.moments[1]
    inside = (errors.inside**2).sum(1).max(initial=0.0)
    wander = 0.0 if predicted.wander is None else float(predicted.wander.max())
    sd = np.sqrt(float(variance.max()) + inside + wander + wide**2)
    low, high = float(mean.min()) - _FAR * sd, float(mean.max()) + _FAR * sd
    return (float(np.exp(low)), float(np.exp(high))) if response.kind == "positive" else (low, high)
