"""The aim `best` on noisy published functions, beside wells at random and wells spread over the
range: how far the condition that would be recommended lies below the best one.

Plates of 12, 6, 6 and 6 wells. After each the study is fitted in brief, alike for all searches, and
the bench step of the highest posterior mean is recommended; its regret is the highest true value on
bench steps less its own. Under a constraint the recommendation must meet it by the posterior
with a probability of 0.9 or more (where none does, the likeliest is recommended), and one that
truly does not counts with the full range of the function as its regret. By seed the noise is drawn
anew, and each function is turned: its axes are exchanged and mirrored at random, alike for all
searches, since opening plates of `best` and of spread wells are otherwise always the same.

Run: python -m tests.benchmarks.best --seeds 30 --workers 2
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from functools import cache
from itertools import repeat
from pathlib import Path
from typing import Any, Literal

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from muntin.record.definition import Definition
from muntin.record.study import Study
from muntin.rehearsal.designs import Name, wells_of
from muntin.rehearsal.refit import assess_briefly, starts_from
from muntin.rehearsal.rehearse import NODES
from muntin.rehearsal.series import with_plate
from muntin.window.assessment import Assessment, Surrogate, assess
from muntin.window.coded import code
from muntin.window.grid import judged_grid
from muntin.window.probability import process_mean
from tests.benchmarks.published import branin_signal, disk, hartmann_signal

Floats = NDArray[np.float64]
Search = Literal["best", "space filling", "random"]
SEARCHES: tuple[Search, ...] = ("best", "space filling", "random")
OWN: dict[Search, Name] = {"best": "plate by plate", "space filling": "space filling"}
PLATES = (12, 6, 6, 6)
RANGE = 100.0
NOISE_SD, PLATE_SD = 2.0, 3.0
LIMIT, LIMIT_NOISE_SD, SURE = 50.0, 3.0, 0.9

BRANIN_AXES = ({"low": -5, "high": 10, "step": 0.5}, {"low": 0, "high": 15, "step": 0.5})
HARTMANN_AXES = ({"low": 0, "high": 1, "step": 0.1},) * 3


@dataclass(frozen=True, kw_only=True)
class Case:
    """A function to search: true signal and, where there is one, what must not exceed LIMIT, both
    (n,) of raw conditions (n, D); sd of the error that the wells of a plate share, in points.
    """

    axes: Sequence[dict[str, float]]
    signal: Callable[[ArrayLike], Floats]
    limited: Callable[[ArrayLike], Floats] | None = None
    plate_sd: float = 0.0
    aimed: float = 90.0

    @property
    def definition(self) -> Definition:
        """The study's, the signal judged against a target that only the best conditions meet."""
        shared = [{"by": ["plate"], "responses": ["signal"]}] if self.plate_sd else []
        responses = [_response("signal", at_least=self.aimed, typical=[0.0, RANGE])]
        if self.limited is not None:
            responses.append(_response("away", at_most=LIMIT, typical=[0.0, RANGE]))
        return Definition.model_validate(
            {
                "study": {"title": "published function"},
                "factors": [{"name": f"x{i}", **a} for i, a in enumerate(self.axes, start=1)],
                "responses": responses,
                "shared_errors": shared,
                "plan": {"bridging_wells": 0},
            }
        )

    def read(self, X: Floats, rng: np.random.Generator) -> dict[str, Floats]:
        """One reading of each response in the wells (n, D) of one plate."""
        z = rng.standard_normal((2, len(X)))
        error = self.plate_sd * rng.standard_normal()
        readings = {"signal": self.signal(X) + error + NOISE_SD * z[0]}
        if self.limited is not None:
            readings["away"] = self.limited(X) + LIMIT_NOISE_SD * z[1]
        return readings


def _response(name: str, **given: Any) -> dict[str, Any]:
    return {"name": name, "kind": "real", **given}


CASES = {
    "Branin": Case(axes=BRANIN_AXES, signal=branin_signal),
    "Branin, plate errors": Case(axes=BRANIN_AXES, signal=branin_signal, plate_sd=PLATE_SD),
    "Hartmann-3": Case(axes=HARTMANN_AXES, signal=hartmann_signal),
    "Branin in a disk": Case(axes=BRANIN_AXES, signal=branin_signal, limited=disk, aimed=99.0),
}


@dataclass(frozen=True)
class Turn:
    """Axes exchanged, and some mirrored, of a range with as many bench steps on each."""

    axes: Sequence[dict[str, float]]
    order: NDArray[np.intp]
    mirrored: NDArray[np.bool_]

    @classmethod
    def of(cls, case: Case, seed: int) -> Turn:
        """That of a seed."""
        rng, count = np.random.default_rng((seed, 2)), len(case.axes)
        return cls(case.axes, rng.permutation(count), rng.random(count) < 0.5)

    def __call__(self, frame: pd.DataFrame) -> Floats:
        """Where the function is asked (n, D) for conditions of the study (raw units)."""
        low, high = (np.array([axis[end] for axis in self.axes]) for end in ("low", "high"))
        unit = (frame.to_numpy(dtype=float) - low) / (high - low)
        unit = np.where(self.mirrored, 1.0 - unit, unit)[:, self.order]
        return np.asarray(low + unit * (high - low))


@dataclass(frozen=True)
class Truth:
    """The bench steps of a case, the true signal (n,) there, and which meet the constraint."""

    frame: pd.DataFrame
    signal: Floats
    meets: NDArray[np.bool_]

    @property
    def best(self) -> float:
        """The highest true signal where the constraint is met."""
        return float(self.signal[self.meets].max())

    def regret(self, row: int) -> float:
        """That of recommending a bench step."""
        return self.best - float(self.signal[row]) if self.meets[row] else RANGE


@cache
def truth_of(name: str, seed: int) -> Truth:
    """The truth of a case, turned by the seed."""
    case = CASES[name]
    frame = judged_grid(case.definition)[0]
    X = Turn.of(case, seed)(frame)
    meets = np.ones(len(X), bool) if case.limited is None else case.limited(X) <= LIMIT
    return Truth(frame, case.signal(X), meets)


def empty(definition: Definition) -> Study:
    """A study without plates."""
    columns = ["plate", "well", "role", *_columns(definition.factor_names, ("", "_target"))]
    columns += _columns(definition.factor_names, ("_measured",))
    columns += _columns([r.name for r in definition.responses], ("", "_sd", "_state", "_side"))
    columns += _columns([r.name for r in definition.responses], ("_exclude",))
    wells = pd.DataFrame(columns=[*columns, "exclude"])
    return Study(folder=Path(), definition=definition, wells=wells, plates=(), notices=())


def _columns(names: Sequence[str], ends: Sequence[str]) -> list[str]:
    return [f"{name}{end}" for name in names for end in ends]


@cache
def opening(name: str, search: Search, surrogate: Surrogate, wells: int) -> pd.DataFrame:
    """Role and factors of an opening plate, before anything is read."""
    fresh = assess(empty(CASES[name].definition), surrogate)
    return wells_of(OWN[search], fresh, wells, "best", 1)


def at_random(truth: Truth, wells: int, rng: np.random.Generator) -> pd.DataFrame:
    """Different bench steps drawn at random: role and factors."""
    rows = rng.choice(len(truth.frame), wells, replace=False)
    return truth.frame.iloc[rows].reset_index(drop=True).assign(role="test")


def recommended(view: Assessment, frame: pd.DataFrame) -> int:
    """The row of the highest posterior mean of the signal, among those that are all but sure to
    meet the constraint if there is one.
    """
    surface = view.surfaces["signal"]
    mean = process_mean(surface, surface.latent(code(view.study.definition, frame)))
    if "away" not in view.surfaces:
        return int(np.argmax(mean))
    met = view.predicted(frame)["away"].process_met()
    return int(
        np.argmax(np.where(met >= SURE, mean, -np.inf)) if met.max() >= SURE else met.argmax()
    )


def play(
    name: str,
    search: Search,
    seed: int,
    surrogate: Surrogate = "stacked",
    plates: Sequence[int] = PLATES,
) -> list[float]:
    """The regret, in points, after each plate of one search."""
    case, truth = CASES[name], truth_of(name, seed)
    study, view, regrets = empty(case.definition), None, []
    for number, wells in enumerate(plates):
        if search == "random":
            chosen = at_random(truth, wells, np.random.default_rng((seed, number, 1)))
        elif view is None:
            chosen = opening(name, search, surrogate, wells)
        else:
            chosen = wells_of(OWN[search], view, wells, "best", seed)
        # Equal for all searches, so that a plate's own error does not tell them apart.
        rng = np.random.default_rng((seed, number, 0))
        readings = case.read(Turn.of(case, seed)(chosen[list(truth.frame.columns)]), rng)
        study = with_plate(study, f"plate-{number + 1:02d}", chosen, readings)
        starts = {} if view is None else starts_from(view)
        view = assess_briefly(study, surrogate, seed, NODES, starts)
        regrets.append(truth.regret(recommended(view, truth.frame)))
    return regrets


def table(name: str, regrets: dict[Search, Floats]) -> None:
    """Print median and 90 % of the regrets (seeds, plates) of each search of a case."""
    case, truth = CASES[name], truth_of(name, 0)
    plate = f"plate error sd {case.plate_sd:g}" if case.plate_sd else "no plate error"
    least, most = float(truth.signal.min()), float(truth.signal.max())
    print(f"{name}: {len(truth.frame)} bench steps, {least:.1f} to {most:.1f} points;", end=" ")
    print(f"noise sd {NOISE_SD:g}, {plate}")
    if case.limited is not None:
        print(
            f"  {100.0 * truth.meets.mean():.0f} % of them allowed, best {truth.best:.1f};", end=" "
        )
        print(f"noise sd {LIMIT_NOISE_SD:g} on a limit of {LIMIT:g}")
    for search, values in regrets.items():
        median, ninth = np.median(values, axis=0), np.quantile(values, 0.9, axis=0)
        figures = zip(median, ninth, strict=True)
        print(f"  {search:<18}" + "".join(f"{m:9.2f}{q:8.2f}" for m, q in figures))
        if case.limited is not None:
            out = 100.0 * (values >= RANGE).mean(axis=0)
            print(f"  {'  not allowed, %':<18}" + "".join(f"{v:9.0f}{'':8}" for v in out).rstrip())


def main() -> None:
    """Print the tables of regret."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seeds", type=int, default=30)
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--surrogate", default="stacked")
    parser.add_argument("--cases", nargs="+", default=[*CASES], choices=[*CASES])
    given = parser.parse_args()
    start = time.perf_counter()
    print(f"regret of the recommended condition, points: median and 90 % of {given.seeds} seeds")
    print(f"{'after':<20}" + "".join(f"{n:>11} wells" for n in np.cumsum(PLATES)))
    with ProcessPoolExecutor(given.workers) as pool:
        for name in given.cases:
            jobs = [(search, seed) for search in SEARCHES for seed in range(given.seeds)]
            played = pool.map(play, repeat(name), *zip(*jobs, strict=True), repeat(given.surrogate))
            values = np.array([*played]).reshape(len(SEARCHES), given.seeds, len(PLATES))
            table(name, dict(zip(SEARCHES, values, strict=True)))
    print(f"{time.perf_counter() - start:.0f} s with {given.workers} workers")


if __name__ == "__main__":
    main()
