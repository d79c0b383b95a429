"""Uptake curves for tests, made of invented numbers."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from muntin.assay.uptake_laws import Law
from muntin.assay.uptake_priors import LogNormal, Priors
from muntin.assay.uptake_table import Curve

PRIORS = Priors(
    capacity=LogNormal(40.0, 1.2), half_time=LogNormal(16.0, 1.4), noise=LogNormal(0.03, 0.7)
)
TIMES = (5.0, 10.0, 20.0, 40.0, 60.0, 120.0)


def curve(
    times: Sequence[float],
    loads: Sequence[float],
    sds: Sequence[float] | float = 0.0,
    sides: Sequence[float] | float = 0.0,
    offered: float | None = None,
) -> Curve:
    """A curve of given readings, in the order of time."""
    count = len(times)
    return Curve(
        name="invented",
        file="uptake/invented.csv",
        times=np.array(times, dtype=float),
        loads=np.array(loads, dtype=float),
        sds=np.broadcast_to(np.asarray(sds, dtype=float), count).copy(),
        sides=np.broadcast_to(np.asarray(sides, dtype=float), count).copy(),
        offered=offered,
    )


def drawn(
    law: Law,
    capacity: float,
    half_time: float,
    noise: float,
    rng: np.random.Generator,
    times: Sequence[float] = TIMES,
    offered: float | None = None,
) -> Curve:
    """A curve that follows a law, with noise in proportion to the load at the last time."""
    takes = capacity / offered if offered else 0.0
    level = min(capacity, offered) if offered else capacity
    loads = level * law.share(np.array(times) / half_time, takes)
    return curve(
        times, loads + noise * loads[-1] * rng.standard_normal(len(times)), offered=offered
    )
