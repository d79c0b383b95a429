"""Writes the plate tables of examples/fab-elution from a drawn process, and reads that fit them.

    python -m tests.benchmarks.make_example

The readings are invented: they come from a mixed-mode process of `processes`, so that the
truth behind the example is known. Plate 1 is a coarse grid with its centre repeated; plate 2
follows the border that plate 1 showed, as a scientist might choose it by eye, and repeats a pass
and a fail of plate 1.
"""

import csv
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import product
from pathlib import Path

import numpy as np

from muntin.bench import default_controls, lay_out, well_names
from tests.benchmarks import example_reads
from tests.benchmarks.processes import DrawnProcess, draw, plate_errors

EXAMPLE = Path(__file__).parents[2] / "examples" / "fab-elution"
COLUMNS = ("well", "role", "elution_ph", "salt", "recovery", "exclude")

PROCESS_SEED = 32
READING_SEED = 14  # plate 1 reads about 2 % high, plate 2 about 3 % low
TARGET = 0.80

Condition = tuple[float, float]  # pH, salt in mM


@dataclass(frozen=True, kw_only=True)
class PlatePlan:
    """Conditions of one plate, and the wells whose reading went wrong."""

    test: Sequence[Condition]
    bridge: Sequence[Condition] = ()
    spoiled: tuple[tuple[Condition, float, str], ...] = ()  # condition, share lost, reason


PLATES = {
    "plate-01": PlatePlan(
        test=[*product((4.8, 5.4, 6.0, 6.6, 7.2), (100, 220, 340, 460)), *[(6.0, 280)] * 4],
        spoiled=(((6.6, 340), 0.45, "filter leaked during the spin, well below was wet"),),
    ),
    "plate-02": PlatePlan(
        test=[
            *[(4.8, 380), (5.1, 380), (5.4, 250), (6.0, 400)],
            *[(6.6, 340), (6.6, 400), (7.2, 80), (7.2, 400)],
            *[(5.1, 320), (5.4, 400), (6.0, 160), (6.6, 140)] * 2,
        ],
        bridge=[(6.0, 280), (6.0, 460)] * 2,
    ),
}


def true_process() -> DrawnProcess:
    """Return the process that the example's readings come from."""
    return draw("mixed mode", np.random.default_rng(PROCESS_SEED), TARGET)


def plate_rows(
    plan: PlatePlan, process: DrawnProcess, plate_effect: float, rng: np.random.Generator
) -> list[dict[str, str]]:
    """Return the rows of one plate table in plate order; controls carry no condition."""
    conditions = [*plan.test, *plan.bridge]
    controls = [role for role, n in default_controls(96).items() for _ in range(n)]
    roles = ["test"] * len(plan.test) + ["bridge"] * len(plan.bridge) + controls
    wells = lay_out(roles, plate=96, rng=rng, conditions=[*conditions, *[None] * len(controls)])
    readings = process.read(conditions, plate_effect, rng)
    rows = [
        {"well": well, "role": role, **_reading(plan, condition, float(reading))}
        for well, role, condition, reading in zip(wells, roles, conditions, readings, strict=False)
    ]
    rows += [
        {"well": well, "role": role}
        for well, role in zip(wells[len(rows) :], controls, strict=True)
    ]
    order = well_names(96)
    return sorted(rows, key=lambda row: order.index(row["well"]))


def _reading(plan: PlatePlan, condition: Condition, recovery: float) -> dict[str, str]:
    reason = ""
    for spoiled, lost, why in plan.spoiled:
        if condition == spoiled:
            recovery, reason = recovery * (1 - lost), why
    ph, salt = condition
    return {
        "elution_ph": f"{ph:g}",
        "salt": f"{salt:g}",
        "recovery": f"{round(recovery, 3):g}",
        "exclude": reason,
    }


def tables() -> Iterator[tuple[str, list[dict[str, str]]]]:
    """Yield name and rows of each plate table; the seeds above decide every digit."""
    process, rng = true_process(), np.random.default_rng(READING_SEED)
    effects = plate_errors(len(PLATES), rng)
    for (name, plan), effect in zip(PLATES.items(), effects, strict=True):
        yield name, plate_rows(plan, process, float(effect), rng)


def write(folder: Path) -> None:
    """Write the plate tables into `folder`."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, rows in tables():
        with (folder / f"{name}.csv").open("w", encoding="utf-8", newline="") as file:
            writer = csv.DictWriter(file, COLUMNS, restval="", lineterminator="\n")
            writer.writeheader()
            writer.writerows(rows)


if __name__ == "__main__":
    write(EXAMPLE / "plates")
    example_reads.write(EXAMPLE / "reads", tables())
