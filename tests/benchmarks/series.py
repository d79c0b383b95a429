"""Plate series played on drawn processes: what share of the range is called wrongly after how many
wells, beside full factorials read with the same surrogate and an ordinary quadratic fit; and
whether what is said to happen happens as often, for the process mean and for future wells.

Run: python -m tests.benchmarks.series --processes 20
"""

from __future__ import annotations

import argparse
import sys
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.selection import select
from muntin.record.definition import Definition
from muntin.record.notes import Plate
from muntin.record.study import Study
from muntin.window.assessment import Assessment, Surrogate, assess
from tests.benchmarks.processes import (
    PH_LEVELS,
    PH_SD,
    SALT_LEVELS,
    SALT_SD,
    DrawnProcess,
    draw,
    plate_errors,
    truth_grid,
)

Array = NDArray[np.float64]
TARGET = 0.8
SERIES = (12, 6, 6)
FACTORIALS = ((8, 6), (12, 8))
KINDS = ("elution", "mixed mode", "near plateau")
By = Literal["mean", "well"]
BY: tuple[By, ...] = ("mean", "well")
CALIBRATION_BUDGET = 0.02

DEFINITION = Definition.model_validate(
    {
        "study": {"title": "drawn process", "judged_by": "mean"},
        "factors": [
            {"name": "ph", "low": 4.5, "high": 7.5, "step": 0.1, "set_sd": PH_SD},
            {
                "name": "salt",
                "low": 50,
                "high": 500,
                "step": 10,
                "set_sd": f"{100.0 * SALT_SD:g} %",
            },
        ],
        "responses": [{"name": "recovery", "kind": "fraction", "at_least": TARGET}],
        "plan": {"bridging_wells": 0},
    }
)


@dataclass(frozen=True)
class Outcome:
    """Share of the range called wrongly at p = 0.5 (percent), by design; and the calibration of
    `mean` and `well` by design: points, sum of p and of true passes (3, 10) in ten bins of p.
    """

    kind: str
    wrong: dict[str, float]
    bins: dict[By, dict[str, Array]]


@dataclass(frozen=True)
class Truth:
    """Bench conditions, whether the process mean meets the target there, and how often a new well
    on a new plate does.
    """

    frame: pd.DataFrame
    mean: NDArray[np.bool_]
    well: Array

    @classmethod
    def of(cls, process: DrawnProcess, rng: np.random.Generator) -> Truth:
        """That of a drawn process at all conditions of the bench."""
        grid = truth_grid()
        mean = process.recovery(grid[:, 0], grid[:, 1]) >= TARGET
        frame = pd.DataFrame(grid, columns=["ph", "salt"])
        return cls(frame, mean, process.chances(grid, TARGET, rng))


def study_of(plates: list[pd.DataFrame]) -> Study:
    """A study in memory from plates with columns ph, salt, recovery."""
    frames = []
    for number, plate in enumerate(plates, start=1):
        count = len(plate)
        frames.append(
            plate.assign(
                plate=f"plate-{number:02d}",
                well=[f"{'ABCDEFGH'[i % 8]}{i // 8 + 1}" for i in range(count)],
                role="test",
                ph_target=plate["ph"],
                salt_target=plate["salt"],
                ph_measured=False,
                salt_measured=False,
                recovery_sd=np.nan,
                recovery_state="read",
                recovery_side=0,
                exclude="",
            )
        )
    columns = [
        "plate",
        "well",
        "role",
        "ph",
        "salt",
        "ph_target",
        "salt_target",
        "ph_measured",
        "salt_measured",
        "recovery",
        "recovery_sd",
        "recovery_state",
        "recovery_side",
        "exclude",
    ]
    wells = pd.concat(frames, ignore_index=True) if frames else pd.DataFrame(columns=columns)
    names = [f"plate-{i:02d}" for i in range(1, len(plates) + 1)]
    return Study(
        folder=Path(),
        definition=DEFINITION,
        wells=wells,
        plates=tuple(Plate(name=n, file=f"plates/{n}.csv") for n in names),
        notices=(),
    )


def play(
    kind: str, seed: int, surrogate: Surrogate = "stacked", factorials: bool = True
) -> Outcome:
    """Draw one process and run every design on it."""
    rng = np.random.default_rng((KINDS.index(kind), seed))
    if kind == "near plateau":
        process = draw("elution", rng, TARGET, near=True)
    else:
        process = draw("mixed mode" if kind == "mixed mode" else "elution", rng, TARGET)
    errors = plate_errors(len(SERIES) + len(FACTORIALS), rng)
    truth = Truth.of(process, np.random.default_rng((KINDS.index(kind), seed, 1)))
    outcome = Outcome(kind, {}, {by: {} for by in BY})
    plates: list[pd.DataFrame] = []
    for number, wells in enumerate(SERIES):
        view = assess(study_of(plates), surrogate, seed=seed)
        selection = select(view, wells, "edge", seed)
        chosen = selection.candidates.iloc[[p.candidate for p in selection.picks]]
        plates.append(read_plate(process, chosen.to_numpy(dtype=float), errors[number], rng))
        view = assess(study_of(plates), surrogate, seed=seed)
        _record(outcome, f"{sum(SERIES[: number + 1])} wells", view, truth)
    for number, (ph, salt) in enumerate(FACTORIALS if factorials else (), start=len(SERIES)):
        plate = read_plate(process, factorial(ph, salt), errors[number], rng)
        name = f"factorial {ph * salt}"
        view = assess(study_of([plate]), surrogate, seed=seed)
        _record(outcome, name, view, truth)
        outcome.wrong[f"least squares {ph * salt}"] = _least_squares(plate, truth)
    return outcome


def read_plate(
    process: DrawnProcess, conditions: Array, error: float, rng: np.random.Generator
) -> pd.DataFrame:
    """Read a plate at conditions (n, 2) with the relative error of the plate."""
    y = process.read(conditions, error, rng)
    return pd.DataFrame({"ph": conditions[:, 0], "salt": conditions[:, 1], "recovery": y})


def factorial(ph: int, salt: int) -> Array:
    """A full factorial on bench steps, from end to end of both ranges."""
    a = PH_LEVELS[np.round(np.linspace(0, len(PH_LEVELS) - 1, ph)).astype(int)]
    b = SALT_LEVELS[np.round(np.linspace(0, len(SALT_LEVELS) - 1, salt)).astype(int)]
    return np.stack(np.meshgrid(a, b, indexing="ij"), axis=-1).reshape(-1, 2).astype(float)


def _record(outcome: Outcome, name: str, view: Assessment, truth: Truth) -> None:
    for by, passes in (("mean", truth.mean), ("well", truth.well)):
        p = view.judged(truth.frame, by)
        place = np.minimum((p * 10).astype(int), 9)
        weights = (np.ones(len(p)), p, passes)
        outcome.bins[by][name] = np.array([np.bincount(place, w, minlength=10) for w in weights])
        if by == "mean":
            outcome.wrong[name] = 100.0 * float(np.mean((p >= 0.5) != truth.mean))


def _least_squares(plate: pd.DataFrame, truth: Truth) -> float:
    """An ordinary quadratic fit of recovery, called by its fitted mean."""
    grid = truth.frame.to_numpy()
    low, high = grid.min(axis=0), grid.max(axis=0)

    def terms(conditions: Array) -> Array:
        x, z = ((2.0 * conditions - low - high) / (high - low)).T
        return np.stack([np.ones_like(x), x, z, x * z, x * x, z * z], axis=1)

    x = terms(plate[["ph", "salt"]].to_numpy(dtype=float))
    coefficients, *_ = np.linalg.lstsq(x, plate["recovery"].to_numpy(dtype=float), rcond=None)
    return 100.0 * float(np.mean((terms(grid) @ coefficients >= TARGET) != truth.mean))


def wrong_calls(outcomes: list[Outcome]) -> None:
    """Print the table of misclassification."""
    print(f"{'share of the range called wrongly, %':<38}{'mean':>8}{'median':>8}{'90 %':>8}")
    for kind in dict.fromkeys(o.kind for o in outcomes):
        mine = [o for o in outcomes if o.kind == kind]
        print(f"{kind} ({len(mine)} drawn processes)")
        for name in mine[0].wrong:
            values = np.array([o.wrong[name] for o in mine])
            figures = (values.mean(), np.median(values), np.quantile(values, 0.9))
            print(f"  {name:<36}" + "".join(f"{v:8.2f}" for v in figures))


def calibration(outcomes: list[Outcome], by: By) -> bool:
    """Print one table of calibration, all kinds together; return whether the series meets its
    budget. The expected calibration error is that of the bins, weighted by their points.
    """
    said = {"mean": "true passes", "well": "passes of future wells"}[by]
    print(f"observed frequency of {said} in ten bins of the predicted probability p_{by}")
    met = True
    for name in outcomes[0].bins[by]:
        points, predicted, passed = sum(o.bins[by][name] for o in outcomes)
        observed = passed / np.maximum(points, 1.0)
        error = float(np.abs(passed - predicted).sum() / points.sum())
        verdict = ""
        if name.endswith("wells"):
            verdict = "met" if error <= CALIBRATION_BUDGET else "MISSED"
            verdict = f"  budget {CALIBRATION_BUDGET}: {verdict}"
            met &= error <= CALIBRATION_BUDGET
        figures = "".join(f"{v:6.2f}" for v in observed)
        print(f"  {name:<16}{figures}   error {error:.3f}{verdict}")
    return met


def main() -> None:
    """Print the tables of misclassification and calibration; exit code 1 over budget."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--processes", type=int, default=20, help="drawn processes of each kind")
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--surrogate", default="stacked")
    parser.add_argument("--kinds", nargs="+", default=KINDS, choices=KINDS)
    parser.add_argument("--no-factorials", action="store_true")
    given = parser.parse_args()
    factorials = not given.no_factorials
    jobs = [
        (kind, seed, given.surrogate, factorials)
        for kind in given.kinds
        for seed in range(given.processes)
    ]
    with ProcessPoolExecutor(given.workers) as pool:
        outcomes = list(pool.map(play, *zip(*jobs, strict=True)))
    wrong_calls(outcomes)
    met = [calibration(outcomes, by) for by in BY]
    sys.exit(int(not all(met)))


if __name__ == "__main__":
    main()
