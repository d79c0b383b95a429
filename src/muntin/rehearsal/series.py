"""One series: every design played on one truth, plate by plate."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.bench.plan import next_plate
from muntin.bench.protein import protein_needed_mg
from muntin.bench.wells import well_names
from muntin.design.weighing import Aim
from muntin.record.notes import Plate
from muntin.record.study import Study
from muntin.rehearsal.designs import Design, controls
from muntin.rehearsal.played import Series, Standing
from muntin.rehearsal.refit import Starts, assess_briefly, starts_from
from muntin.rehearsal.truth import Recipe, Truth
from muntin.window.assessment import Assessment, Surrogate
from muntin.window.grid import judged_grid

Array = NDArray[np.float64]
_READING = 17
# The set point is sought among so many conditions.
_SOUGHT = 400


@dataclass(frozen=True, kw_only=True, eq=False)
class Setup:
    """What all series of a rehearsal share.

    study: as it stands. p_now (P,): p_mean at the judged conditions today; best_now: today's best
    judged probability, NaN where with_best is not set. nodes: hyperparameter nodes of a refit;
    starts: where the first refits begin to search.
    """

    study: Study
    designs: tuple[Design, ...]
    surrogate: Surrogate
    aim: Aim
    seed: int
    nodes: int
    with_best: bool
    p_now: Array
    best_now: float
    starts: Starts


def play(setup: Setup, recipe: Recipe) -> Series:
    """Play every design on the truth of a recipe; one thread of linear algebra, so that the numbers
    do not depend on how many there are.
    """
    from threadpoolctl import threadpool_limits

    with threadpool_limits(limits=1, user_api="blas"):
        truth = recipe.draw()
        grid = judged_grid(setup.study.definition)[0]
        passes = truth.passes(grid)
        played: dict[str, tuple[Standing, ...]] = {
            design.name: _played(setup, design, truth, recipe.number, grid, passes)
            for design in setup.designs
        }
    return Series(recipe.number, played)


def wrongly_called(p: Array, passes: NDArray[np.bool_]) -> float:
    """Share of conditions called wrongly: pass where p (n,) is 0.5 or more, else fail."""
    return float(np.mean((p >= 0.5) != passes))


def expected_wrong(p: Array) -> float:
    """Share of conditions that may be called wrongly, mean of min(p, 1 - p)."""
    return float(np.minimum(p, 1.0 - p).mean())


def best_probability(view: Assessment) -> float:
    """Highest judged probability among some hundred conditions of the range."""
    definition = view.study.definition
    few = judged_grid(definition, _SOUGHT)[0]
    return float(view.judged(few, definition.judged_by).max())


def _played(
    setup: Setup,
    design: Design,
    truth: Truth,
    number: int,
    grid: pd.DataFrame,
    passes: NDArray[np.bool_],
) -> tuple[Standing, ...]:
    view: Assessment | None = None
    study, names = setup.study, list(setup.study.definition.factor_names)
    rows = pd.DataFrame(columns=["role", *names])
    standings = [_standing(setup, rows, setup.p_now, setup.best_now, passes)]
    for plate in range(len(design.sizes)):
        wells = design.first if view is None else design.plate(view, plate, setup.aim, setup.seed)
        # Equal for all designs, so that a plate's own error does not tell them apart.
        rng = np.random.default_rng((setup.seed, number, _READING, plate))
        name = next_plate(study)
        readings = truth.read(wells[names], name, rng)
        study = with_plate(study, name, wells, readings)
        added = [wells[["role", *names]], pd.DataFrame({"role": controls(study, plate)})]
        rows = pd.concat([rows, *added] if len(rows) else added, ignore_index=True)
        starts = setup.starts if view is None else starts_from(view)
        view = assess_briefly(study, setup.surrogate, setup.seed, setup.nodes, starts)
        best = best_probability(view) if setup.with_best else np.nan
        standings.append(_standing(setup, rows, view.judged(grid, "mean"), best, passes))
    return tuple(standings)


def _standing(
    setup: Setup, rows: pd.DataFrame, p: Array, best: float, passes: NDArray[np.bool_]
) -> Standing:
    """rows: role and factors of all wells so far."""
    needed = protein_needed_mg(setup.study, rows)
    return Standing(
        tests=int((rows["role"] == "test").sum()),
        wells=len(rows),
        mg=np.nan if needed is None else needed,
        expected=expected_wrong(p),
        wrong=wrongly_called(p, passes),
        best=best,
    )


def with_plate(
    study: Study, name: str, wells: pd.DataFrame, readings: Mapping[str, Array]
) -> Study:
    """The study with one more plate read: wells with role and factors, readings by response in the
    user's unit; other responses are awaited.
    """
    definition, count = study.definition, len(wells)
    columns: dict[str, object] = {
        "plate": [name] * count,
        "well": well_names(definition.plate)[:count],
        "role": list(wells["role"]),
    }
    for factor in definition.factor_names:
        values = wells[factor].to_numpy()
        columns |= {factor: values, f"{factor}_target": values, f"{factor}_measured": False}
    for response in definition.responses:
        r, y = response.name, readings.get(response.name)
        columns |= {
            r: np.full(count, np.nan) if y is None else y,
            f"{r}_sd": np.nan,
            f"{r}_state": "awaited" if y is None else "read",
            f"{r}_side": 0,
            f"{r}_exclude": "",
        }
    frame = pd.DataFrame(columns)
    # Columns that only plates already run know, such as a lot, are new with the plate.
    lots = {c: name for c in study.wells.columns if c not in frame} | {"exclude": ""}
    frame = frame.assign(**lots)
    old = study.wells
    both = pd.concat([old, frame[list(old.columns)]], ignore_index=True) if len(old) else frame
    plate = Plate(name=name, file=f"plates/{name}.csv")
    return replace(study, wells=both, plates=(*study.plates, plate))
