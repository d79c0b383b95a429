"""The load: how much of the protein's solution each well is given."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import pandas as pd

from muntin.bench.protein import protein_left_mg, wells_mg
from muntin.record.bench import LOAD
from muntin.record.faults import Fault, listed, number
from muntin.record.study import Study
from muntin.record.volumes import Pipette

_SLACK = 1e-9


@dataclass(frozen=True, kw_only=True)
class Load:
    """The protein of a plan.

    needed_mg: what its wells take. left_mg: what may still be used before it is run, the reserve
    kept back. steps: pipette steps by well, empty where [bench] has no protein_mg_per_ml.
    measured_mg: what those steps hold, dead_mg: what stays in the trough; None where not known.
    """

    needed_mg: float
    left_mg: float
    steps: Mapping[str, int]
    measured_mg: float | None
    dead_mg: float | None


def load_of(
    study: Study, rows: pd.DataFrame, pipette: Pipette, file: str
) -> tuple[Load | None, list[Fault]]:
    """Return the load of the rows of a plan (well, role, the factors), and what is wrong with it;
    None where the study has no [protein].
    """
    protein, bench = study.definition.protein, study.definition.bench
    left = protein_left_mg(study)
    if protein is None or left is None:
        return None, []
    each = wells_mg(study.definition, rows)
    needed, strength = float(each.sum()), bench.protein_mg_per_ml
    faults = []
    if needed > left + _SLACK:
        problem = f"needs {number(round(needed, 6))} mg of protein;"
        allowed = f"{number(round(left, 6))} mg are left beyond the reserve"
        faults.append(Fault(file=file, problem=problem, allowed=allowed))
    if strength is None:
        load = Load(needed_mg=needed, left_mg=left, steps={}, measured_mg=None, dead_mg=None)
        return load, faults
    given = {w: float(mg) for w, mg in zip(rows["well"], each, strict=True) if mg > 0}
    steps = {well: pipette.nearest(1000.0 * mg / strength) for well, mg in given.items()}
    faults += _floor_faults(given, steps, strength, pipette, file)
    dead = None if bench.dead_volume_ul is None else bench.dead_volume_ul * strength / 1000.0
    measured = float(pipette.ul(sum(steps.values()))) * strength / 1000.0
    load = Load(needed_mg=needed, left_mg=left, steps=steps, measured_mg=measured, dead_mg=dead)
    return load, faults


def _floor_faults(
    given: Mapping[str, float],
    steps: Mapping[str, int],
    strength: float,
    pipette: Pipette,
    file: str,
) -> list[Fault]:
    """Wells whose load is less than the pipette draws; one fault an amount."""
    short: dict[float, list[str]] = {}
    for well, mg in given.items():
        if steps[well] < pipette.floor:
            short.setdefault(mg, []).append(well)
    floor = float(pipette.ul(pipette.floor))
    faults = []
    for mg, wells in short.items():
        takes = number(round(1000.0 * mg / strength, 2))
        most = number(float(f"{1000.0 * mg / floor:.6g}"))
        faults.append(
            Fault(
                file=file,
                where=f"well{'s' if len(wells) > 1 else ''} {listed(wells)}",
                value=f"{number(mg)} mg of protein",
                problem=f"takes {takes} µL of {LOAD}; the pipette draws no less than",
                allowed=f"{number(floor)} µL",
                hint=f"study.toml, bench, protein_mg_per_ml: a load of {most} mg/mL or below works",
            )
        )
    return faults
