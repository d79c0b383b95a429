"""An invented study that every figure has something of: three responses, two plates, protein."""

from __future__ import annotations

from pathlib import Path

import pandas as pd

from muntin.record import Study
from tests.studies import (
    HCP,
    PH,
    RECOVERY,
    SALT,
    SHIFT,
    read,
    read_hcp,
    read_shift,
    spread,
    written,
)

FACTORS = ({**PH, "kept_within": 0.1}, {**SALT, "label": "Salt"})
RESPONSES = (
    RECOVERY,
    {**HCP, "label": "HCP"},
    {**SHIFT, "label": "Shift", "unit": "mV", "at_least": -3.0},
)
PROTEIN = {"available_mg": 40, "reserved_mg": 10, "per_well_mg": 0.25}
ERRORS = (
    {"by": ["plate"], "acts": "scale", "responses": ["recovery"]},
    {"by": ["plate", "ph"], "acts": "inside", "responses": ["hcp"]},
)


def plates() -> list[pd.DataFrame]:
    """Two plates; the second repeats two conditions of the first, twice each."""
    first, second = spread(FACTORS, 14, 1), spread(FACTORS, 8, 2)
    roles = ["test"] * 8 + ["bridge"] * 4
    second = pd.concat([second, first.iloc[[0, 0, 3, 3]]], ignore_index=True).assign(role=roles)
    out = []
    for number, conditions in enumerate((first, second)):
        plate = read(conditions, seed=number + 1, plate_error=0.04 * (-1) ** number)
        plate["hcp"] = read_hcp(conditions, seed=number + 5)["hcp"]
        plate["shift"] = read_shift(conditions, seed=number + 9)["shift"]
        out.append(plate)
    return out


def study(folder: Path) -> Study:
    """The study, written to a folder and opened."""
    return written(
        folder,
        plates(),
        factors=FACTORS,
        responses=RESPONSES,
        protein=PROTEIN,
        shared_errors=ERRORS,
        study={"required_probability": 0.7},
    )
