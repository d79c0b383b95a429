"""Priors of the surrogates: one table, in latent units over coded factors."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

Kind = Literal["fraction", "positive", "real"]


@dataclass(frozen=True)
class LogNormal:
    """A positive quantity whose logarithm is N(ln median, log_sd^2)."""

    median: float
    log_sd: float


@dataclass(frozen=True, kw_only=True)
class Priors:
    """Priors of one response.

    `mean`, `mean_sd`: the constant level, N(mean, mean_sd^2). `process_sd`: sd of the Matern
    process, and of the linear and product coefficients of the polynomial. `curvature_sd`: sd of
    the square coefficients. `length_scale`: each factor's, in coded units (the range is 2).
    `noise_sd`: sd of a well's reading. `scale_error`, `inside_error`: sd of each shared error.
    `ceiling_gap`: how far below 1 a fraction levels off; read for that kind only.
    """

    mean: float
    mean_sd: float
    process_sd: LogNormal
    curvature_sd: LogNormal
    length_scale: LogNormal
    noise_sd: LogNormal
    scale_error: LogNormal
    inside_error: LogNormal
    ceiling_gap: LogNormal = LogNormal(0.03, 1.0)

    def with_overrides(self, overrides: Mapping[str, object]) -> Priors:
        """A copy with some entries replaced; a LogNormal may be given as (median, log_sd)."""
        changes: dict[str, object] = {}
        for name, value in overrides.items():
            pair = isinstance(value, tuple) and not isinstance(value, LogNormal)
            changes[name] = LogNormal(*value) if pair else value  # type: ignore[misc]
        return replace(self, **changes)  # type: ignore[arg-type]


_FRACTION = Priors(
    mean=0.0,
    mean_sd=2.5,
    process_sd=LogNormal(2.0, 0.7),
    curvature_sd=LogNormal(1.0, 0.7),
    length_scale=LogNormal(2.5, 0.5),
    noise_sd=LogNormal(0.03, 0.7),
    scale_error=LogNormal(0.02, 0.7),
    inside_error=LogNormal(0.1, 0.7),
)


def priors_of(kind: Kind, typical: tuple[float, float]) -> Priors:
    """The table's row for a kind of response; `typical` is read for `positive` and `real`.

    A fraction's latent unit is the logit, whose usual range is -3 to 3 (0.05 to 0.95); the other
    kinds take the same shape on half of their typical range. A positive response is modelled on
    its natural logarithm, so its noise and its shared errors are relative.
    """
    if kind == "fraction":
        return _FRACTION
    low, high = np.log(typical) if kind == "positive" else typical
    half = float(high - low) / 2.0
    relative = kind == "positive"
    return Priors(
        mean=float(low + high) / 2.0,
        mean_sd=half,
        process_sd=LogNormal(2.0 / 3.0 * half, 0.7),
        curvature_sd=LogNormal(half / 3.0, 0.7),
        length_scale=_FRACTION.length_scale,
        noise_sd=LogNormal(0.08, 0.7) if relative else LogNormal(0.05 * half, 1.0),
        scale_error=LogNormal(0.05, 0.7) if relative else LogNormal(0.1 * half, 1.0),
        inside_error=LogNormal(0.1 * half, 1.0),
    )
