"""A study's wells as arrays that the surrogates understand."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.record.definition import Definition
from muntin.record.responses import Response
from muntin.record.study import Study
from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Choice, Coding, Continuous
from muntin.surrogate.priors import Priors, priors_of

Array = NDArray[np.float64]
Index = NDArray[np.intp]


@dataclass(frozen=True)
class SharedBy:
    """Which columns each shared error of one response goes by: inside errors, scale errors."""

    inside: tuple[tuple[str, ...], ...]
    scale: tuple[tuple[str, ...], ...]


def coding_of(definition: Definition) -> Coding:
    """The coding of the study's factors."""
    factors: list[Continuous | Choice] = []
    for factor in definition.factors:
        if factor.choices is not None:
            factors.append(Choice(levels=len(factor.choices)))
        else:
            low, high, _ = factor.span
            factors.append(Continuous(low=low, high=high, log=factor.scale == "log"))
    return Coding(tuple(factors))


def code(definition: Definition, frame: pd.DataFrame) -> Array:
    """Coded X (n, D) of a frame with a column a factor, raw units."""
    columns = []
    for factor in definition.factors:
        values = frame[factor.name]
        if factor.choices is not None:
            number = {choice: i for i, choice in enumerate(factor.choices)}
            columns.append(values.map(number).to_numpy(dtype=float))
        else:
            columns.append(values.to_numpy(dtype=float))
    return coding_of(definition).code(columns)


def setting_sd(
    definition: Definition, frame: pd.DataFrame, measured: NDArray[np.bool_] | None = None
) -> Array:
    """Sd (n, D) with which the bench sets each coded column at the conditions of a frame (raw
    units); 0 for choices, where a factor has no set_sd, and where `measured` (n, factors).
    """
    coding = coding_of(definition)
    out = np.zeros((len(frame), len(coding.columns.factor)))
    for number, factor in enumerate(definition.factors):
        if factor.set_sd is None or not factor.continuous:
            continue
        x = frame[factor.name].to_numpy(dtype=float)
        low, high, _ = factor.span
        sd = factor.set_sd.at(x)
        coded = sd / x / np.log(high / low) if factor.scale == "log" else sd / (high - low)
        free = np.ones(len(x)) if measured is None else ~measured[:, number]
        out[:, coding.columns.factor.index(number)] = 2.0 * coded * free
    return out


def shared_by(definition: Definition, response: Response) -> SharedBy:
    """The shared errors of a response; on a link without a plateau all of them act inside."""
    bounded = response.kind == "fraction"
    touching = [
        e for e in definition.shared_errors if e.responses is None or response.name in e.responses
    ]
    scale = [e.by for e in touching if bounded and e.acts == "scale"]
    inside = [e.by for e in touching if not (bounded and e.acts == "scale")]
    return SharedBy(tuple(inside), tuple(scale))


def group_numbers(definition: Definition, frame: pd.DataFrame, by: tuple[str, ...]) -> Index:
    """Number (n,) of the group that each row of a frame falls into; factors go by their target."""
    factors = definition.factor_names
    names = [f"{n}_target" if n in factors and f"{n}_target" in frame else n for n in by]
    groups = frame.groupby(names, sort=False, dropna=False).ngroup()
    return np.asarray(groups.to_numpy(), dtype=np.intp)


def readings_of(study: Study, response: Response) -> Readings:
    """The readings of one response on the scale where noise is additive (ln y if positive)."""
    definition = study.definition
    frame = study.readings(response.name)
    y = frame["y"].to_numpy(dtype=float)
    sd = np.nan_to_num(frame["sd"].to_numpy(dtype=float))
    if response.kind == "positive":
        y, sd = np.log(y), sd / y
    shared = shared_by(definition, response)
    measured = [f"{name}_measured" for name in definition.factor_names]
    known = frame[measured].to_numpy(dtype=bool)
    return Readings(
        X=code(definition, frame),
        y=y,
        sd=sd,
        censored=frame["censored"].to_numpy(dtype=np.intp),
        setting=setting_sd(definition, frame, known),
        plate=np.asarray(frame.groupby("plate", sort=False).ngroup(), dtype=np.intp),
        inside=tuple(group_numbers(definition, frame, by) for by in shared.inside),
        scale=tuple(group_numbers(definition, frame, by) for by in shared.scale),
    )


def typical_range(study: Study, response: Response) -> tuple[float, float]:
    """Range in which readings usually lie, natural unit: as given, else that of the readings."""
    if response.kind == "fraction":
        return 0.05, 0.95
    if response.typical is not None:
        return response.typical
    y = study.readings(response.name)["y"].to_numpy(dtype=float)
    if len(y) and y.max() > y.min():
        return float(y.min()), float(y.max())
    low, high = response.target
    middle = next(v for v in (*(y[:1]), low, high, 1.0) if v is not None)
    if response.kind == "positive":
        return 0.5 * middle, 2.0 * middle
    return middle - max(1.0, abs(middle)), middle + max(1.0, abs(middle))


def priors_for(study: Study, response: Response) -> Priors:
    """The response's priors: the built-in table's, with the study's own in their place."""
    priors = priors_of(response.kind, typical_range(study, response))
    own = {
        name: (value["median"], value["log_sd"]) if isinstance(value, dict) else value
        for name, value in response.priors.items()
    }
    return priors.with_overrides(own)
