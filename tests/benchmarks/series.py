"""Plate series played on drawn processes: what share of the range is called wrongly after how many
wells, beside full factorials read with the same surrogate and an ordinary quadratic fit; and
whether what is said to happen happens as often, for the process mean and for future wells.

Run: python -m tests.benchmarks.series --processes 20                # two factors
     python -m tests.benchmarks.series --processes 20 --factors 3
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field
from functools import cache
from itertools import repeat
from typing import Literal

import numpy as np
import pandas as pd
from joblib import Memory
from numpy.typing import NDArray

from muntin.window.assessment import Assessment, Surrogate, assess
from tests.benchmarks.benches import (
    FACTORS,
    KINDS,
    TARGET,
    Truth,
    drawn,
    factorial,
    picked,
    read_plate,
    study_of,
)
from tests.benchmarks.processes import DrawnProcess, plate_errors

Array = NDArray[np.float64]
OWN: tuple[tuple[int, ...], ...] = ((12, 6, 6, 6, 6), (24, 24), (48,))
FACTORIALS = {2: ((8, 6), (12, 8)), 3: ((4, 4, 3), (6, 4, 4))}
By = Literal["mean", "well"]
BY: tuple[By, ...] = ("mean", "well")
# Plates of the first series after which probabilities are held against what happens.
CALIBRATED = 3
CALIBRATION_BUDGET = 0.02


@dataclass(frozen=True)
class Outcome:
    """Share of the range called wrongly at p = 0.5 (percent), by design; and the calibration of
    `mean` and `well` by design: points, sum of p and of true passes (3, 10) in ten bins of p.
    """

    kind: str
    wrong: dict[str, float] = field(default_factory=dict)
    bins: dict[By, dict[str, Array]] = field(default_factory=lambda: {by: {} for by in BY})

    def record(self, name: str, view: Assessment, truth: Truth, calibrated: bool) -> None:
        """Hold what is said after a plate against the truth."""
        passes: dict[By, Array] = {"mean": truth.mean.astype(float), "well": truth.well}
        for by in BY if calibrated else BY[:1]:
            p = view.judged(truth.frame, by)
            if by == "mean":
                self.wrong[name] = 100.0 * float(np.mean((p >= 0.5) != truth.mean))
            if calibrated:
                place = np.minimum((p * 10).astype(int), 9)
                weights = (np.ones(len(p)), p, passes[by])
                counts = [np.bincount(place, w, minlength=10) for w in weights]
                self.bins[by][name] = np.array(counts)


@dataclass(frozen=True)
class Game:
    """A drawn process with its truth, and the errors (one for each plate) that all designs meet."""

    process: DrawnProcess
    truth: Truth
    errors: Array
    factors: int
    seed: int
    surrogate: Surrogate

    def view(self, plates: list[pd.DataFrame]) -> Assessment:
        """What the plates tell."""
        return assess(study_of(plates, self.factors), self.surrogate, seed=self.seed)

    def series(self, sizes: Sequence[int], rng: np.random.Generator, outcome: Outcome) -> None:
        """Play plates that are planned one after the other."""
        conditions = opening(sizes[0], self.factors)
        plates = [read_plate(self.process, conditions, self.errors[0], rng)]
        for number in range(1, len(sizes) + 1):
            view = self.view(plates)
            calibrated = len(sizes) > 2 and number <= CALIBRATED
            outcome.record(title(sizes[:number]), view, self.truth, calibrated)
            if number < len(sizes):
                conditions = picked(view, sizes[number], self.seed)
                plates.append(read_plate(self.process, conditions, self.errors[number], rng))

    def factorial(self, counts: Sequence[int], rng: np.random.Generator, outcome: Outcome) -> None:
        """Read a full factorial on one plate."""
        plate = read_plate(self.process, factorial(*counts), self.errors[0], rng)
        name = f"factorial {' x '.join(map(str, counts))}"
        outcome.record(name, self.view([plate]), self.truth, calibrated=False)
        outcome.wrong[f"{name}, least squares"] = least_squares(plate, self.truth)


@cache
def opening(wells: int, factors: int) -> Array:
    """Conditions (wells, factors) of an opening plate: the same whatever the process."""
    return picked(assess(study_of([], factors)), wells, 1)


def title(sizes: Sequence[int]) -> str:
    """Name of a series of plates."""
    return f"{' + '.join(map(str, sizes))} wells"


def play(
    kind: str,
    seed: int,
    factors: int = 2,
    surrogate: Surrogate = "stacked",
) -> Outcome:
    """Draw one process and run every design on it."""
    root = (KINDS.index(kind), seed, factors)
    rng = np.random.default_rng(root)
    process = drawn(kind, rng, factors)
    errors = plate_errors(max(map(len, OWN)), rng)
    truth = Truth.of(process, np.random.default_rng((*root, 1)), factors)
    game = Game(process, truth, errors, factors, seed, surrogate)
    outcome = Outcome(kind)
    for number, sizes in enumerate(OWN):
        game.series(sizes, np.random.default_rng((*root, 2, number)), outcome)
    for number, counts in enumerate(FACTORIALS[factors]):
        game.factorial(counts, np.random.default_rng((*root, 3, number)), outcome)
    return outcome


def least_squares(plate: pd.DataFrame, truth: Truth) -> float:
    """Share (percent) that an ordinary quadratic fit of recovery calls wrongly by its mean."""
    names = [name for name in FACTORS if name in plate]
    grid = truth.frame[names].to_numpy()
    low, high = grid.min(axis=0), grid.max(axis=0)

    def terms(conditions: Array) -> Array:
        x = (2.0 * conditions - low - high) / (high - low)
        both = [x[:, i] * x[:, j] for i in range(x.shape[1]) for j in range(i + 1)]
        return np.column_stack([np.ones(len(x)), x, *both])

    x, y = terms(plate[names].to_numpy(dtype=float)), plate["recovery"].to_numpy(dtype=float)
    coefficients, *_ = np.linalg.lstsq(x, y, rcond=None)
    return 100.0 * float(np.mean((terms(grid) @ coefficients >= TARGET) != truth.mean))


def wrong_calls(outcomes: list[Outcome]) -> None:
    """Print the table of misclassification."""
    heads = f"{'mean':>8}{'(se)':>7}{'median':>8}{'90 %':>8}"
    print(f"{'share of the range called wrongly, %':<40}{heads}")
    for kind in dict.fromkeys(o.kind for o in outcomes):
        mine = [o for o in outcomes if o.kind == kind]
        print(f"{kind} ({len(mine)} drawn processes)")
        for name in mine[0].wrong:
            values = np.array([o.wrong[name] for o in mine])
            error = values.std(ddof=1) / np.sqrt(len(values)) if len(values) > 1 else np.nan
            middle, most = np.quantile(values, (0.5, 0.9))
            said = f"{f'({error:.2f})':>7}{middle:8.2f}{most:8.2f}"
            print(f"  {name:<38}{values.mean():8.2f}{said}")


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
        verdict = "met" if error <= CALIBRATION_BUDGET else "MISSED"
        met &= error <= CALIBRATION_BUDGET
        figures = "".join(f"{v:6.2f}" for v in observed)
        said = f"error {error:.3f}, budget {CALIBRATION_BUDGET}: {verdict}"
        print(f"  {name:<20}{figures}   {said}")
    return met


def main(arguments: Sequence[str] | None = None) -> int:
    """Print the tables of misclassification and calibration; return 1 over budget."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--processes", type=int, default=20, help="drawn processes of each kind")
    parser.add_argument("--factors", type=int, default=2, choices=sorted(FACTORIALS))
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--surrogate", default="stacked")
    parser.add_argument("--kinds", nargs="+", default=KINDS, choices=KINDS)
    parser.add_argument("--kept", help="folder where played processes are kept, to go on from")
    given = parser.parse_args(arguments)
    jobs = [(kind, seed) for kind in given.kinds for seed in range(given.processes)]
    played = Memory(given.kept, verbose=0).cache(play)
    alike = [given.factors, given.surrogate]
    with ProcessPoolExecutor(given.workers) as pool:
        outcomes = list(pool.map(played, *zip(*jobs, strict=True), *map(repeat, alike)))
    wrong_calls(outcomes)
    met = [calibration(outcomes, by) for by in BY]
    return int(not all(met))


if __name__ == "__main__":
    sys.exit(main())
