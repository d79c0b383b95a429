"""Columns against what was predicted of them: run by run, and the shift that all runs share.

A run agrees where its reading lies in the central 95 % of what a new well on a new plate was
predicted to read. Over runs i let d_i be reading less predicted process mean, V = C + diag(own_i^2)
their covariance if columns were plates without a plate error. A shift shared by all runs is then
estimated by generalised least squares, (1' V^-1 d) / (1' V^-1 1) with variance 1 / (1' V^-1 1)
(Aitken 1935), without a prior. What is left of each run beside the shift has variance
V_ii - 1 / (1' V^-1 1).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from muntin.record.column_plan import ColumnPlan, PlannedRun, Prediction
from muntin.record.column_runs import ColumnRun
from muntin.record.responses import Response

Array = NDArray[np.float64]
Verdict = Literal["agrees", "off by more than predicted", "only a limit is known"]
ShiftVerdict = Literal["none to be told", "no more than a new plate", "more than plates differ"]
_WIDE = 1.959963984540054  # standard normal quantile at 0.975


@dataclass(frozen=True, kw_only=True)
class Compared:
    """One response of one run, in the response's unit.

    reading: of the column; where only a limit is known that limit, and side -1 where the reading
    lies below it, 1 above. sd: standard uncertainty that it states. difference: reading less
    predicted process mean, low and high its 95 % interval from the predicted spread of a reading;
    None where only a limit is known. meets: whether the reading meets the target; None without
    one, or where the limit does not tell. beside_shift: what is left of the difference beside the
    shift that all runs share (a factor for a positive response), and whether that is more than
    predicted; None where no shift was told.
    """

    run: PlannedRun
    response: str
    predicted: float
    reading_low: float
    reading_high: float
    reading: float
    sd: float
    side: int
    verdict: Verdict
    difference: float | None = None
    low: float | None = None
    high: float | None = None
    meets: bool | None = None
    beside_shift: float | None = None
    beside_off: bool | None = None


@dataclass(frozen=True, kw_only=True)
class Shift:
    """What all runs of a response share: columns less plates, in its unit, or as a factor where
    `ratio`; low and high its 95 % interval; plate: by how much, up or down, a new plate may be off
    with 95 % probability (as a factor where ratio).
    """

    response: str
    runs: int
    ratio: bool
    mean: float
    low: float
    high: float
    plate: float
    verdict: ShiftVerdict


@dataclass(frozen=True, kw_only=True)
class Comparison:
    """All that came of column runs: response by response and run by run, and shared shifts.

    awaited: planned runs of which nothing counts yet.
    """

    compared: tuple[Compared, ...]
    shifts: tuple[Shift, ...]
    left_out: tuple[ColumnRun, ...]
    awaited: tuple[PlannedRun, ...]


def compare(
    responses: Sequence[Response], plans: Sequence[ColumnPlan], made: Sequence[ColumnRun]
) -> Comparison:
    """Hold the runs that were made against what their plan predicted of them."""
    compared: list[Compared] = []
    shifts: list[Shift] = []
    for response in responses:
        told = [
            one
            for plan in plans
            for prediction in plan.predictions
            if prediction.response == response.name
            for one in _compared(response, plan, prediction, made)
        ]
        shift, beside = _shared(response, plans, told)
        compared += beside
        shifts += [] if shift is None else [shift]
    known = {one.run.run for one in compared}
    every = [run for plan in plans for run in plan.runs]
    return Comparison(
        compared=tuple(compared),
        shifts=tuple(shifts),
        left_out=tuple(run for run in made if _left_out(run)),
        awaited=tuple(run for run in every if run.run not in known),
    )


def _left_out(run: ColumnRun) -> bool:
    return bool(run.excluded) or any(reading.reason for reading in run.readings.values())


def _compared(
    response: Response, plan: ColumnPlan, prediction: Prediction, made: Sequence[ColumnRun]
) -> list[Compared]:
    by_number = {run.run: run for run in made}
    found = []
    for i, run in enumerate(plan.runs):
        own = by_number.get(run.run)
        reading = None if own is None else own.used(response.name)
        if reading is None:
            continue
        sd = 0.0 if np.isnan(reading.sd) else reading.sd
        mean = prediction.mean[i]
        low = mean - float(np.hypot(mean - prediction.reading_low[i], _WIDE * sd))
        high = mean + float(np.hypot(prediction.reading_high[i] - mean, _WIDE * sd))
        known = reading.side == 0
        off = not low <= reading.value <= high
        verdict: Verdict = "off by more than predicted" if off else "agrees"
        found.append(
            Compared(
                run=run,
                response=response.name,
                predicted=mean,
                reading_low=low,
                reading_high=high,
                reading=reading.value,
                sd=sd,
                side=reading.side,
                verdict=verdict if known else "only a limit is known",
                difference=reading.value - mean if known else None,
                low=reading.value - high if known else None,
                high=reading.value - low if known else None,
                meets=_meets(response, reading.value, reading.side),
            )
        )
    return found


def _meets(response: Response, value: float, side: int) -> bool | None:
    """Whether a reading, or all that lies beyond a limit, meets the target or misses it."""
    low = -np.inf if response.at_least is None else response.at_least
    high = np.inf if response.at_most is None else response.at_most
    if not response.judged:
        return None
    if side == 0:
        return bool(low <= value <= high)
    if side < 0:
        return False if value <= low else True if value <= high and np.isinf(low) else None
    return False if value >= high else True if value >= low and np.isinf(high) else None


def _shared(
    response: Response, plans: Sequence[ColumnPlan], told: Sequence[Compared]
) -> tuple[Shift | None, list[Compared]]:
    """The shift of the runs of a response that were read, and the runs with what is left of each
    beside it; none of fewer than two runs, where it could not be told from their own errors.
    """
    use = [i for i, one in enumerate(told) if one.difference is not None]
    if len(use) < 2:
        return None, [*told]
    joint = _joint(response.name, plans, [told[i] for i in use])
    shift, variance = shared_shift(joint.d, joint.V, joint.between)
    alone = shared_shift(joint.d, joint.V)[1]
    spread = _WIDE * np.sqrt(np.maximum(np.diag(joint.V) - alone, 0.0))
    beside = [*told]
    for i, r, wide in zip(use, joint.d - shift, spread, strict=True):
        beside[i] = replace(
            told[i],
            beside_shift=float(np.exp(r) if joint.ratio else r),
            beside_off=bool(abs(r) > wide),
        )
    return _shift(response.name, len(use), joint, shift, variance), beside


def shared_shift(d: Array, V: Array, between: Array | None = None) -> tuple[float, float]:
    """Estimate and variance of a shift that differences d (n,) of covariance V (n, n) share.

    between (n, n): what covariances V leaves out; it adds to the variance, not to the weights.
    """
    ones = np.ones(len(d))
    white = np.linalg.solve(V, ones)
    weights = white / (ones @ white)
    more = 0.0 if between is None else float(weights @ between @ weights)
    return float(weights @ d), 1.0 / float(ones @ white) + max(0.0, more)


@dataclass(frozen=True, eq=False)
class _Joint:
    """Differences (n,) of runs, their covariance, what it leaves out between plans, the sd that a
    plate shares, and whether all of it is in logarithms.
    """

    d: Array
    V: Array
    between: Array
    plate: float
    ratio: bool


def _joint(name: str, plans: Sequence[ColumnPlan], told: Sequence[Compared]) -> _Joint:
    """The joint law of the differences of runs.

    How the process means of two plans go together is not on record. They rest on much the same
    wells, so for the variance of a shift they are taken to err all alike, the worst case.
    """
    n = len(told)
    V, between = np.zeros((n, n)), np.zeros((n, n))
    places = [_place(name, plans, one.run.run) for one in told]
    ratio = any(prediction.logarithm for prediction, _ in places)
    spread = np.sqrt([prediction.covariance[row][row] for prediction, row in places])
    for i, (prediction, row) in enumerate(places):
        for j, (other, column) in enumerate(places):
            if other is prediction:
                V[i, j] = prediction.covariance[row][column]
            else:
                between[i, j] = spread[i] * spread[j]
    read = np.array([one.reading for one in told])
    stated = np.array([one.sd for one in told]) / (read if ratio else 1.0)
    own = np.array([prediction.own_sd[row] for prediction, row in places])
    centre = np.array([prediction.centre[row] for prediction, row in places])
    plate = np.array([prediction.plate_sd[row] for prediction, row in places])
    return _Joint(
        d=(np.log(read) if ratio else read) - centre,
        V=V + np.diag(own**2 + stated**2),
        between=between,
        plate=float(np.sqrt((plate**2).mean())),
        ratio=ratio,
    )


def _place(name: str, plans: Sequence[ColumnPlan], number: int) -> tuple[Prediction, int]:
    return next(
        (prediction, i)
        for plan in plans
        for i, run in enumerate(plan.runs)
        if run.run == number
        for prediction in plan.predictions
        if prediction.response == name
    )


def _shift(name: str, runs: int, joint: _Joint, shift: float, variance: float) -> Shift:
    half, reach = _WIDE * np.sqrt(variance), _WIDE * np.sqrt(variance + joint.plate**2)
    verdict: ShiftVerdict = "more than plates differ"
    if abs(shift) <= half:
        verdict = "none to be told"
    elif abs(shift) <= reach:
        verdict = "no more than a new plate"
    told = [shift, shift - half, shift + half, _WIDE * joint.plate]
    mean, low, high, by = (float(np.exp(v)) if joint.ratio else float(v) for v in told)
    return Shift(
        response=name,
        runs=runs,
        ratio=joint.ratio,
        mean=mean,
        low=low,
        high=high,
        plate=by,
        verdict=verdict,
    )
