"""A simulated bench with two or three factors: its study, its plates, and the truth behind it."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.selection import select
from muntin.record.definition import Definition
from muntin.record.notes import Plate
from muntin.record.study import Study
from muntin.window.assessment import Assessment
from tests.benchmarks.processes import (
    ADDITIVE_LEVELS,
    PH_LEVELS,
    PH_SD,
    SALT_LEVELS,
    SALT_SD,
    DrawnProcess,
    draw,
    truth_grid,
)

Array = NDArray[np.float64]
TARGET = 0.8
KINDS = ("elution", "mixed mode", "near plateau", "island")
FACTORS = ("ph", "salt", "additive")
LEVELS = (PH_LEVELS, SALT_LEVELS, ADDITIVE_LEVELS)


def definition_of(factors: int = 2) -> Definition:
    """The study of a drawn process of so many factors."""
    relative = f"{100.0 * SALT_SD:g} %"
    every = [
        {"name": "ph", "low": 4.5, "high": 7.5, "step": 0.1, "set_sd": PH_SD},
        {"name": "salt", "low": 50, "high": 500, "step": 10, "set_sd": relative},
        {"name": "additive", "low": 0, "high": 200, "step": 10, "set_sd": relative},
    ]
    return Definition.model_validate(
        {
            "study": {"title": "drawn process", "judged_by": "mean"},
            "factors": every[:factors],
            "responses": [{"name": "recovery", "kind": "fraction", "at_least": TARGET}],
            "plan": {"bridging_wells": 0},
        }
    )


DEFINITION = definition_of()


def drawn(kind: str, rng: np.random.Generator, factors: int = 2) -> DrawnProcess:
    """Draw a process of one of the KINDS."""
    if kind == "near plateau":
        return draw("elution", rng, TARGET, near=True, factors=factors)
    return draw(kind, rng, TARGET, factors=factors)  # type: ignore[arg-type]


@dataclass(frozen=True)
class Truth:
    """Bench conditions, whether the process mean meets the target there, and how often a new well
    on a new plate does.
    """

    frame: pd.DataFrame
    mean: NDArray[np.bool_]
    well: Array

    @classmethod
    def of(cls, process: DrawnProcess, rng: np.random.Generator, factors: int = 2) -> Truth:
        """That of a drawn process at the conditions of `truth_grid`."""
        grid = truth_grid(factors)
        mean = process.recovery(*grid.T) >= TARGET
        frame = pd.DataFrame(grid, columns=list(FACTORS[:factors]))
        return cls(frame, mean, process.chances(grid, TARGET, rng))


def study_of(plates: list[pd.DataFrame], factors: int = 2) -> Study:
    """A study in memory from plates with a column a factor and one of recovery."""
    names = FACTORS[:factors]
    frames = []
    for number, plate in enumerate(plates, start=1):
        own = {f"{name}_target": plate[name] for name in names}
        frames.append(
            plate.assign(
                plate=f"plate-{number:02d}",
                well=[f"{'ABCDEFGH'[i % 8]}{i // 8 + 1}" for i in range(len(plate))],
                role="test",
                **own,
                **{f"{name}_measured": False for name in names},
                recovery_sd=np.nan,
                recovery_state="read",
                recovery_side=0,
                exclude="",
            )
        )
    by_factor = [f"{name}{part}" for part in ("", "_target", "_measured") for name in names]
    by_response = [f"recovery{part}" for part in ("", "_sd", "_state", "_side")]
    columns = ["plate", "well", "role", *by_factor, *by_response, "exclude"]
    wells = pd.concat(frames, ignore_index=True) if frames else pd.DataFrame(columns=columns)
    of_plates = [f"plate-{i:02d}" for i in range(1, len(plates) + 1)]
    return Study(
        folder=Path(),
        definition=definition_of(factors),
        wells=wells,
        plates=tuple(Plate(name=n, file=f"plates/{n}.csv") for n in of_plates),
        notices=(),
    )


def picked(view: Assessment, wells: int, seed: int) -> Array:
    """Conditions (wells, factors) that are planned next."""
    selection = select(view, wells, "edge", seed)
    numbers = [pick.candidate for pick in selection.picks]
    return selection.candidates.iloc[numbers].to_numpy(dtype=float)


def read_plate(
    process: DrawnProcess, conditions: Array, error: float, rng: np.random.Generator
) -> pd.DataFrame:
    """Read a plate at conditions (n, factors) with the relative error of the plate."""
    y = process.read(conditions, error, rng)
    columns = dict(zip(FACTORS, conditions.T, strict=False))
    return pd.DataFrame({**columns, "recovery": y})


def factorial(*counts: int) -> Array:
    """A full factorial on bench steps, so many levels a factor, from end to end of all ranges."""
    levels = [
        every[np.round(np.linspace(0, len(every) - 1, count)).astype(int)]
        for count, every in zip(counts, LEVELS, strict=False)
    ]
    grid = np.meshgrid(*levels, indexing="ij")
    return np.stack(grid, axis=-1).reshape(-1, len(counts)).astype(float)
