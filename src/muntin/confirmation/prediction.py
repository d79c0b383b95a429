"""What is predicted of column runs before they are made, as if a column were a plate.

The figures are those of the plate scale. Of one run: the process mean with its interval, and the
interval of one reading of a new well on a new plate. Of several: the covariance of the process
means, and how much a reading errs by alone and with its plate, on the scale on which noise is
additive (logarithms for a positive response), so that a shift that all runs share can be told.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.column_plan import Prediction, finite
from muntin.record.responses import Response
from muntin.surrogate.influence import joint_draws
from muntin.surrogate.links import mean_of, slope_of
from muntin.surrogate.nodes import Surface
from muntin.window.assessment import Assessment
from muntin.window.coded import code, setting_sd
from muntin.window.predicted import Predicted
from muntin.window.probability import Target, process_mean, process_quantile

Array = NDArray[np.float64]
LEVELS = (0.025, 0.975)
_DRAWS = 4000
_MOST_WIDENED = 60
_WIDE = 2 * 1.959963984540054  # a central 95 % interval over the sd


def predictions(view: Assessment, conditions: pd.DataFrame, seed: int) -> list[Prediction]:
    """Return what is predicted at conditions (a column a factor, raw units), by response.

    Responses that have not been read are left out. The same seed gives the same figures.
    """
    rng = np.random.default_rng(seed)
    X = code(view.study.definition, conditions)
    setting = setting_sd(view.study.definition, conditions)
    return [
        _prediction(response, view.surfaces[response.name], X, setting, rng)
        for response in view.study.definition.responses
        if response.name in view.stacks
    ]


def _prediction(
    response: Response, surface: Surface, X: Array, setting: Array, rng: np.random.Generator
) -> Prediction:
    unit, log = response.unit_size, surface.link == "log"
    predicted = Predicted.of(surface, X, Target(), setting)
    mean = process_mean(surface, predicted.moments) * unit
    low, high = (process_quantile(surface, predicted.moments, level) * unit for level in LEVELS)
    below, above = (reading_quantile(predicted, level) * unit for level in LEVELS)
    own, plate = error_sds(predicted)
    size = 1.0 if log else unit
    ends = (np.log(low), np.log(high)) if log else (low, high)
    covariance = _correlation(surface, X, rng) * np.outer(*2 * [(ends[1] - ends[0]) / _WIDE])
    return Prediction(
        response=response.name,
        mean=finite(mean),
        mean_low=finite(low),
        mean_high=finite(high),
        reading_low=finite(below),
        reading_high=finite(above),
        logarithm=log,
        centre=finite(surface.weights @ predicted.moments[0] if log else mean),
        covariance=tuple(finite(row) for row in covariance),
        own_sd=finite(own * size),
        plate_sd=finite(plate * size),
    )


def _correlation(surface: Surface, X: Array, rng: np.random.Generator) -> Array:
    """Correlation (n, n) of the process means, from draws on the scale on which noise is additive;
    their sds follow from the exact intervals.
    """
    draws = joint_draws(surface, X, _DRAWS, rng)
    centred = np.log(draws) if surface.link == "log" else draws
    covariance = np.atleast_2d(np.cov(centred, rowvar=False))
    sd = np.sqrt(np.diag(covariance))
    return covariance / np.outer(sd, sd)


def reading_quantile(predicted: Predicted, level: float) -> Array:
    """Quantile (n,) of one reading of a new well on a new plate, natural unit."""
    count = predicted.moments[0].shape[1]
    return np.array([_quantile(predicted.at(np.array([i])), level) for i in range(count)])


def _quantile(one: Predicted, level: float) -> float:
    """The quantile at one condition: where the chance to lie below it is `level`."""
    from scipy.optimize import brentq

    log = one.surface.link == "log"

    def excess(place: float) -> float:
        return float(one.met(Target(high=float(np.exp(place)) if log else place))[0]) - level

    ends = [float(process_quantile(one.surface, one.moments, at)[0]) for at in LEVELS]
    low, high = map(np.log, ends) if log else ends
    step = max(high - low, 1e-6)
    low, high = _widened(excess, low, -step), _widened(lambda x: -excess(x), high, step)
    found = float(brentq(excess, low, high, xtol=1e-6 * step, rtol=1e-12))
    return float(np.exp(found)) if log else found


def _widened(excess: Callable[[float], float], place: float, step: float) -> float:
    """The first place, in growing steps, at which the excess is below 0."""
    for _ in range(_MOST_WIDENED):
        if excess(place) < 0.0:
            return place
        place, step = place + step, 1.5 * step
    raise ArithmeticError("no quantile found")


def error_sds(predicted: Predicted) -> tuple[Array, Array]:
    """Sds (n,) of what a reading errs by alone (noise, setting) and of what its plate shares, to
    first order at each node's mean, on the scale on which noise is additive; natural unit.
    """
    surface, errors = predicted.surface, predicted.surface.errors
    mean = predicted.moments[0]
    wander = np.zeros_like(mean) if predicted.wander is None else predicted.wander
    inside = (errors.inside**2).sum(1)[:, None]
    slope, level = np.ones_like(mean), np.zeros_like(mean)
    if surface.link == "logit":
        slope = slope_of("logit", mean, errors.ceiling[:, None])
        level = mean_of("logit", mean, errors.ceiling[:, None])
    own = errors.noise[:, None] ** 2 + wander * slope**2
    plate = inside * slope**2 + (errors.scale**2).sum(1)[:, None] * level**2
    return np.sqrt(surface.weights @ own), np.sqrt(surface.weights @ plate)
