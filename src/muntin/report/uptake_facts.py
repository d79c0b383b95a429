"""Contact time as plain values, for --json."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict
from typing import Any

import numpy as np

from muntin.assay.uptake import Interval, Uptake, interval
from muntin.assay.uptake_priors import LogNormal, Priors
from muntin.assay.uptake_quadrature import Grid
from muntin.assay.uptake_remarks import Remark
from muntin.record.keys import Floats

LONGER = 1.1


def uptake_facts(uptake: Uptake, remarks: Sequence[Remark], planned: float | None) -> Any:
    """Return what a curve tells: loads in mg/mL resin, times in min, intervals of 95 %."""
    curve = uptake.curve
    pairs = zip(uptake.grids, uptake.law_weights, strict=True)
    return {
        "name": curve.name,
        "file": curve.file,
        "readings": len(curve.times),
        "times_min": np.unique(curve.times).tolist(),
        "offered": curve.offered,
        "equilibrium": asdict(uptake.equilibrium()),
        "t90_min": asdict(uptake.time_to(0.90)),
        "t95_min": asdict(uptake.time_to(0.95)),
        "planned": None if planned is None else _planned(uptake, planned),
        "noise_share": uptake.noise(),
        "laws": [_law(grid, weight, planned) for grid, weight in pairs],
        "remarks": [remark._asdict() for remark in remarks],
        "notices": list(curve.notices),
    }


def priors_facts(priors: Priors) -> dict[str, dict[str, float]]:
    """Return the priors: median and sd of the natural logarithm."""
    names = {"capacity": "capacity", "half_time": "half_time_min", "noise": "noise_share"}
    return {name: _log_normal(getattr(priors, own)) for own, name in names.items()}


def gain_of_longer(uptake: Uptake, planned: float) -> float:
    """Return the share by which 10 % more time raises the expected load."""
    return uptake.load_at(LONGER * planned).mean / uptake.load_at(planned).mean - 1.0


def _planned(uptake: Uptake, planned: float) -> dict[str, Any]:
    return {
        "minutes": planned,
        "load": asdict(uptake.load_at(planned)),
        "share_of_equilibrium": asdict(uptake.share_at(planned)),
        "gain_of_10_per_cent_longer": gain_of_longer(uptake, planned),
    }


def _law(grid: Grid, weight: float, planned: float | None) -> dict[str, Any]:
    def told(values: Floats) -> dict[str, float]:
        return asdict(within(grid, values))

    return {
        "name": grid.law.name,
        "says": grid.law.says,
        "source": grid.law.source,
        "weight": weight,
        "log_evidence": grid.log_evidence,
        "capacity": told(grid.capacity),
        "equilibrium": told(grid.equilibrium),
        "rate": grid.law.rate,
        "rate_per_min": told(grid.law.rates(grid.half_time, grid.takes)),
        "t90_min": told(grid.time_to(0.90)),
        "t95_min": told(grid.time_to(0.95)),
        "load_planned": None if planned is None else told(grid.load_at(planned)),
        "noise_share": grid.noise,
    }


def within(grid: Grid, values: Floats) -> Interval:
    """Return the interval of values (nodes,) under one law."""
    return interval(values, grid.weights)


def _log_normal(prior: LogNormal) -> dict[str, float]:
    return {"median": prior.median, "log_sd": prior.log_sd}
