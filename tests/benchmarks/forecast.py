"""The forecast against what then happened, over plate series played on drawn processes.

After an opening plate of 12 wells, and again after a second one, the next plate is planned and its
forecast taken for several numbers of wells. Then so many wells of the plan are read on a new plate,
everything is fitted again, and three numbers are held against each other: the share called wrongly
that was forecast, the share that is expected once the plate is read, and the share that really is
called wrongly; likewise the probability of the set point and the chance that it reaches 0.99.
Besides the kinds of `series` there are plates with large scale errors, and truths outside the
model: a cliff where protein precipitates, and wells that lose part of theirs.

Run: python -m tests.benchmarks.forecast --processes 20
"""

from __future__ import annotations

import argparse
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import asdict, dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from muntin.design.further import Rooms, prospects
from muntin.design.selection import select
from muntin.record.study import Study
from muntin.window.assessment import Surrogate, assess
from tests.benchmarks.benches import DEFINITION, TARGET, Truth, picked, read_plate, study_of
from tests.benchmarks.processes import PLATE_SD, DrawnProcess, draw, plate_errors

Floats = NDArray[np.float64]
OPENING, SECOND, WELLS = 12, 12, (6, 12, 24, 48)
LARGE_PLATE_SD = 0.08
LIMIT = 0.99
JUDGED = DEFINITION.study.model_copy(update={"judged_by": "well"})
BY_WELL = DEFINITION.model_copy(update={"study": JUDGED})


@dataclass(frozen=True, kw_only=True)
class Cliff(DrawnProcess):
    """A process that loses 40 % of the protein, all at once, beyond a line in pH and salt."""

    salt_at_six: float
    salt_per_ph: float

    def recovery(self, ph: ArrayLike, salt: ArrayLike) -> Floats:
        """Return the share collected; shapes broadcast."""
        edge = self.salt_at_six + self.salt_per_ph * (np.asarray(ph, dtype=float) - 6.0)
        return super().recovery(ph, salt) * np.where(np.asarray(salt) > edge, 0.6, 1.0)


@dataclass(frozen=True, kw_only=True)
class Losing(DrawnProcess):
    """A process of whose wells one in twenty reads 0.2 too low."""

    def read(
        self, conditions: ArrayLike, plate_effects: ArrayLike, rng: np.random.Generator
    ) -> Floats:
        """Return one reading of recovery for each well."""
        y = super().read(conditions, plate_effects, rng)
        return y - 0.2 * (rng.random(y.shape) < 0.05)


def cliff(rng: np.random.Generator) -> DrawnProcess:
    """Draw a process with a cliff that leaves between 5 and 50 % of the range in the window."""
    while True:
        drawn = Cliff(
            **asdict(draw("elution", rng, TARGET)),
            salt_at_six=rng.uniform(250, 450),
            salt_per_ph=rng.uniform(-60, 60),
        )
        if 0.05 <= drawn.window_share(TARGET) <= 0.5:
            return drawn


KINDS: dict[str, Callable[[np.random.Generator], DrawnProcess]] = {
    "elution": lambda rng: draw("elution", rng, TARGET),
    "mixed mode": lambda rng: draw("mixed mode", rng, TARGET),
    "near plateau": lambda rng: draw("elution", rng, TARGET, near=True),
    "large plate errors": lambda rng: draw("mixed mode", rng, TARGET),
    "cliff": cliff,
    "losing wells": lambda rng: Losing(**asdict(draw("elution", rng, TARGET))),
}


@dataclass(frozen=True, kw_only=True)
class Case:
    """One forecast and what then happened: shares called wrongly and set points' probabilities,
    now, as forecast, as found after the plate, and in truth; and whether the set point reaches
    LIMIT, as forecast (a chance), as found, and in truth.
    """

    kind: str
    read: int
    wells: int
    wrong: tuple[float, float, float, float]
    best: tuple[float, float, float, float]
    reached: tuple[float, bool, bool]


def studied(plates: list[pd.DataFrame]) -> Study:
    """A study in memory that is judged by new wells."""
    return replace(study_of(plates), definition=BY_WELL)


def play(kind: str, seed: int, surrogate: Surrogate, wells: Sequence[int]) -> list[Case]:
    """Draw one process and hold the forecasts of two plates against what happens."""
    number = [*KINDS].index(kind)
    rng = np.random.default_rng((number, seed, 7))
    process = KINDS[kind](rng)
    truth = Truth.of(process, np.random.default_rng((number, seed, 8)))
    sd = LARGE_PLATE_SD if kind == "large plate errors" else PLATE_SD
    cases, plates = [], []
    for count in (OPENING, SECOND):
        view = assess(studied(plates), surrogate, seed=seed)
        conditions = picked(view, count, seed)
        plates.append(read_plate(process, conditions, plate_errors(1, rng, sd)[0], rng))
        cases += [*_next_plate(kind, process, truth, plates, wells, rng, sd, seed, surrogate)]
    return cases


def _next_plate(
    kind: str,
    process: DrawnProcess,
    truth: Truth,
    plates: list[pd.DataFrame],
    wells: Sequence[int],
    rng: np.random.Generator,
    sd: float,
    seed: int,
    surrogate: Surrogate,
) -> Iterator[Case]:
    """Forecast the next plate for each number of wells, then read so many of its wells."""
    view = assess(studied(plates), surrogate, seed=seed)
    window = view.window()
    selection = select(view, max(wells), "edge", seed)
    chosen = selection.candidates.iloc[[pick.candidate for pick in selection.picks]]
    ahead = prospects(view, window, selection, (0, *wells), Rooms(first=96, further=96), LIMIT)
    for prospect in ahead[1:]:
        some = chosen.iloc[: prospect.wells].to_numpy(dtype=float)
        plate = read_plate(process, some, plate_errors(1, rng, sd)[0], rng)
        after = assess(studied([*plates, plate]), surrogate, seed=seed)
        then = after.window()
        calls = then.grid["p_mean"].to_numpy() >= 0.5
        at = then.setpoint[["ph", "salt"]].to_numpy(dtype=float)
        found = float(then.setpoint["probability"])
        passes = float(process.chances(at, TARGET, np.random.default_rng(seed))[0])
        yield Case(
            kind=kind,
            read=sum(map(len, plates)),
            wells=prospect.wells,
            wrong=(
                window.wrong_share,
                prospect.wrong_share,
                then.wrong_share,
                float(np.mean(calls != truth.mean)),
            ),
            best=(
                float(window.setpoint["probability"]),
                prospect.set_point,
                found,
                passes,
            ),
            reached=(prospect.reached, found >= LIMIT, passes >= LIMIT),
        )


def tables(cases: Sequence[Case]) -> None:
    """Print means by kind of process and number of wells, in per cent."""
    print("share of the range called wrongly, %: expected today, as forecast, as expected once the")
    print(
        "plate is read (ratio to the forecast; sd over processes of the difference), and in truth"
    )
    _table(cases, ("today", "forecast", "found", "ratio", "spread", "true"), _wrong)
    print(
        "probability of the set point, %: today, as forecast, as found (sd of the difference), and"
    )
    print(f"in truth; then the chance forecast that it reaches {100.0 * LIMIT:g} %, how often it")
    print("was found to, and how often it truly does")
    heads = ("today", "forecast", "found", "spread", "true", "| chance", "found", "true")
    _table(cases, heads, _best)


def _table(
    cases: Sequence[Case], heads: Sequence[str], row: Callable[[Sequence[Case]], list[float]]
) -> None:
    print(f"{'wells read':<14}" + "".join(f"{head:>10}" for head in heads))
    kinds = [*dict.fromkeys(case.kind for case in cases)]
    for kind in [*kinds, *([""] if len(kinds) > 1 else [])]:
        mine = [case for case in cases if kind in ("", case.kind)]
        rows = sorted({(case.read, case.wells) for case in mine})
        print(f"{kind or 'all kinds'} ({len(mine) // len(rows)} drawn processes)")
        for read, wells in rows:
            here = [case for case in mine if (case.read, case.wells) == (read, wells)]
            figures = "".join(f"{value:10.2f}" for value in row(here))
            print(f"  {f'{read} + {wells}':<12}{figures}")


def _wrong(cases: Sequence[Case]) -> list[float]:
    shares = 100.0 * np.array([case.wrong for case in cases])
    today, said, found, true = shares.mean(axis=0)
    return [today, said, found, found / said, np.std(shares[:, 2] - shares[:, 1]), true]


def _best(cases: Sequence[Case]) -> list[float]:
    p = 100.0 * np.array([case.best for case in cases])
    today, said, found, true = p.mean(axis=0)
    reached = 100.0 * np.array([case.reached for case in cases], dtype=float).mean(axis=0)
    return [today, said, found, np.std(p[:, 2] - p[:, 1]), true, *reached]


def main() -> None:
    """Print the tables of forecasts and what then happened."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--processes", type=int, default=20, help="drawn processes of each kind")
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--surrogate", default="stacked")
    parser.add_argument("--kinds", nargs="+", default=[*KINDS], choices=[*KINDS])
    parser.add_argument("--wells", nargs="+", type=int, default=WELLS, help="wells of the plate")
    given = parser.parse_args()
    wells = tuple(sorted(given.wells))
    jobs = [
        (kind, seed, given.surrogate, wells)
        for kind in given.kinds
        for seed in range(given.processes)
    ]
    with ProcessPoolExecutor(given.workers) as pool:
        cases = [case for cases in pool.map(play, *zip(*jobs, strict=True)) for case in cases]
    tables(cases)


if __name__ == "__main__":
    main()
