"""False alarms of the model checks: drawn processes read with nothing wrong, and what fails.

Each process is read by the plate series of `series`, by a factorial plate of 48 wells, and by three
plates of 16 wells that fill the range and repeat four conditions of the first. Setting errors are
stated, plates have errors of 3 %. A serious failure withdraws the data's support from the window.

Run: python -m tests.benchmarks.alarms --processes 10
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Iterator
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.selection import select
from muntin.record.study import Study
from muntin.window.assessment import Surrogate, assess
from muntin.window.checks import Check
from tests.benchmarks.benches import KINDS, drawn, factorial, read_plate, study_of
from tests.benchmarks.processes import PH_LEVELS, SALT_LEVELS, DrawnProcess, plate_errors
from tests.benchmarks.trials import spread

Array = NDArray[np.float64]
SERIES = (12, 6, 6)
PLATES, WELLS, BRIDGES = 3, 16, 4
# Share of the studies that may be called not supported by the data.
BUDGET = 0.03


@dataclass(frozen=True)
class Alarms:
    """The checks of one study: kind of process, its seed, the design, and what was found."""

    kind: str
    seed: int
    design: str
    checks: tuple[Check, ...]

    def failed(self, serious: bool = False) -> list[Check]:
        """The checks that failed, or those of them that are serious."""
        return [c for c in self.checks if not c.passed and (c.serious or not serious)]


def play(kind: str, seed: int, surrogate: Surrogate = "stacked") -> list[Alarms]:
    """Draw one process and check every study of it."""
    rng = np.random.default_rng((KINDS.index(kind), seed))
    process = drawn(kind, rng)
    return [
        Alarms(kind, seed, design, assess(study, surrogate, seed=seed).checks())
        for design, study in studies(process, seed, rng, surrogate)
    ]


def studies(
    process: DrawnProcess, seed: int, rng: np.random.Generator, surrogate: Surrogate
) -> Iterator[tuple[str, Study]]:
    """The studies of one process, each with the name of its design."""
    errors = iter(plate_errors(len(SERIES) + 1 + PLATES, rng))
    plates: list[pd.DataFrame] = []
    for number, wells in enumerate(SERIES, start=1):
        picks = select(assess(study_of(plates), surrogate, seed=seed), wells, "edge", seed)
        chosen = picks.candidates.iloc[[p.candidate for p in picks.picks]]
        plates.append(read_plate(process, chosen.to_numpy(dtype=float), next(errors), rng))
        yield f"{sum(SERIES[:number])} wells, {number} planned", study_of(plates)
    yield "factorial 48", study_of([read_plate(process, factorial(8, 6), next(errors), rng)])
    yield (
        f"{PLATES * WELLS} wells, {PLATES} bridged",
        study_of([read_plate(process, c, next(errors), rng) for c in bridged(rng)]),
    )


def bridged(rng: np.random.Generator) -> list[Array]:
    """Conditions (WELLS, 2) of each plate; the later ones begin with the first few of the first."""
    own = WELLS - BRIDGES
    X = spread(WELLS + (PLATES - 1) * own, rng)
    ph = PH_LEVELS[np.round(0.5 * (X[:, 0] + 1.0) * (len(PH_LEVELS) - 1)).astype(int)]
    salt = SALT_LEVELS[np.round(0.5 * (X[:, 1] + 1.0) * (len(SALT_LEVELS) - 1)).astype(int)]
    every = np.column_stack([ph, salt])
    parts = np.split(every, [WELLS + own * i for i in range(PLATES - 1)])
    return [parts[0], *(np.concatenate([every[:BRIDGES], part]) for part in parts[1:])]


def table(every: list[Alarms]) -> None:
    """Print how many studies each check failed, and how many seriously, by design."""
    names = list(dict.fromkeys(c.name for a in every for c in a.checks))
    designs = list(dict.fromkeys(a.design for a in every))
    print("studies in which a check failed / failed seriously, of those in which it was made")
    print(f"{'':<22}" + "".join(f"{d:>22}" for d in designs))
    for name in names:
        cells = [_cell(name, [a for a in every if a.design == d]) for d in designs]
        print(f"{name:<22}" + "".join(f"{c:>22}" for c in cells))


def _cell(name: str, mine: list[Alarms]) -> str:
    made = sum(any(c.name == name for c in a.checks) for a in mine)
    failed, serious = (sum(any(c.name == name for c in a.failed(s)) for a in mine) for s in (0, 1))
    return f"{failed} / {serious} of {made}"


def unsupported(every: list[Alarms]) -> bool:
    """Print how many windows are not supported by the data; whether that is within the budget."""
    for kind in dict.fromkeys(a.kind for a in every):
        mine = [a for a in every if a.kind == kind]
        count = sum(bool(a.failed(serious=True)) for a in mine)
        print(f"{kind}: {count} of {len(mine)} windows not supported by the data")
    share = sum(bool(a.failed(serious=True)) for a in every) / len(every)
    met = share <= BUDGET
    verdict = "met" if met else "MISSED"
    print(f"in all {100.0 * share:.1f} %, budget {100.0 * BUDGET:.0f} %: {verdict}")
    return met


def told(every: list[Alarms]) -> None:
    """Print the sentences of the checks that failed."""
    for a in every:
        for c in a.failed():
            mark = "serious" if c.serious else "note"
            print(f"{a.kind} {a.seed}, {a.design}: {mark}, {c.name}: {c.sentence}", flush=True)


def main() -> None:
    """Print the tables; exit code 1 over budget."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--processes", type=int, default=10, help="drawn processes of each kind")
    parser.add_argument("--first", type=int, default=0, help="seed of the first")
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--surrogate", default="stacked")
    parser.add_argument("--kinds", nargs="+", default=KINDS, choices=KINDS)
    parser.add_argument("--sentences", action="store_true", help="print what failed")
    given = parser.parse_args()
    seeds = range(given.first, given.first + given.processes)
    jobs = [(kind, seed, given.surrogate) for kind in given.kinds for seed in seeds]
    every: list[Alarms] = []
    with ProcessPoolExecutor(given.workers) as pool:
        for part in pool.map(play, *zip(*jobs, strict=True)):
            every += part
            if given.sentences:
                told(part)
    table(every)
    sys.exit(int(not unsupported(every)))


if __name__ == "__main__":
    main()
