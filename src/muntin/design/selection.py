"""The choice of a plate's conditions, pick by pick."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.best import BestCriterion
from muntin.design.bridging import bridging_conditions
from muntin.design.candidates import Levels, RunCondition, candidate_frame, run_conditions
from muntin.design.edge import EdgeCriterion, LazyGreedy
from muntin.design.forecast import Tails, wrong_share
from muntin.design.outlook import Outlook
from muntin.record.definition import Definition
from muntin.window.assessment import Assessment, target_of
from muntin.window.coded import code, group_numbers, setting_sd, shared_by
from muntin.window.grid import judged_grid
from muntin.window.predicted import Predicted

Array = NDArray[np.float64]
Aim = Literal["edge", "best", "both"]
_NODES = 8
_WATCHED = 1500
_DECIDED = 1e-3
# An opening plate of so many wells begins and ends with its centre: one repeat shows the noise.
_CENTRED = 8
# A plate's shared errors leave little to learn from more wells of the best condition than these.
_MOST_REPEATS = 4


@dataclass(frozen=True)
class Pick:
    """One well of the plan: the candidate's number, its role, and what it was picked for."""

    candidate: int
    role: Literal["test", "bridge"]
    purpose: Literal["edge", "best", "repeat", "pass", "fail"]


@dataclass(frozen=True)
class Selection:
    """The conditions chosen for a plate.

    candidates: all conditions that were weighed (raw units); picks: the wells in order of choice,
    bridging wells first; run: conditions that were run; forecast: expected wrong share after 0,
    1, ... test wells, the first with nothing new read.
    """

    candidates: pd.DataFrame
    picks: tuple[Pick, ...]
    run: tuple[RunCondition, ...]
    forecast: tuple[float, ...]


def select(view: Assessment, wells: int, aim: Aim, seed: int) -> Selection:
    """Choose bridging wells and `wells` test wells for the next plate."""
    study, definition = view.study, view.study.definition
    run = () if view.fresh else run_conditions(study)
    frame = candidate_frame(definition, run)
    table = _Table(view, frame, run, seed)
    bridge = _bridge(view, frame, run, definition.plan.bridging_wells)
    picks = [Pick(c, "bridge", "pass" if kind == "pass" else "fail") for c, kind in bridge]
    forecast = [table.forecast()]
    for candidate, _ in bridge:
        table.take(candidate)
    repeats = definition.plan.repeats_min
    centre = _centre(table.X) if view.fresh and wells >= _CENTRED else None
    while len(forecast) <= wells:
        purpose = table.turn(aim, len(forecast) - 1)
        left = wells + 1 - len(forecast)
        if centre is not None and (left == wells or left <= repeats):
            chosen = centre
        else:
            chosen = table.choose(purpose, new=left >= repeats)
        for number in range(min(repeats, left)):
            table.take(chosen)
            picks.append(Pick(chosen, "test", purpose if number == 0 else "repeat"))
            forecast.append(table.forecast())
    return Selection(frame, tuple(picks), run, tuple(forecast))


def _centre(X: Array) -> int:
    """The candidate nearest to the middle of the coded range."""
    return int(np.argmin((X**2).sum(axis=1)))


def _bridge(
    view: Assessment, frame: pd.DataFrame, run: tuple[RunCondition, ...], wells: int
) -> list[tuple[int, str]]:
    """Candidate numbers of the bridging wells; only conditions that may be run again."""
    names = list(frame.columns)
    number = {tuple(row): i for i, row in enumerate(frame.itertuples(index=False, name=None))}
    again = [r for r in run if r.values in number]
    if not again:
        return []
    ran = pd.DataFrame([r.values for r in again], columns=names)

    def beside(first: int) -> NDArray[np.bool_]:
        levels = Levels(view.study.definition, ran)
        levels.use(first)
        return levels.open()

    chosen = bridging_conditions(again, view.judged(ran, "mean"), wells, beside)
    return [(number[again[i].values], kind) for i, kind in chosen]


@dataclass
class _Table:
    """Candidates under weighing: outlooks that are updated with each well taken."""

    view: Assessment
    frame: pd.DataFrame
    run: tuple[RunCondition, ...]
    seed: int
    taken: list[int] = field(default_factory=list)

    def __post_init__(self) -> None:
        definition = self.view.study.definition
        self.levels = Levels(definition, self.frame)
        judged, _ = judged_grid(definition)
        self.X, P = code(definition, self.frame), code(definition, judged)
        self.setting = setting_sd(definition, self.frame)
        self.responses = [r for r in definition.judged if r.name in self.view.surfaces]
        self.targets = tuple(target_of(r) for r in self.responses)
        surfaces = [self.view.surfaces[r.name] for r in self.responses]
        self.today = [
            Tails.of(Predicted.of(surface, P, target, np.zeros_like(P)))
            for surface, target in zip(surfaces, self.targets, strict=True)
        ]
        p = np.prod([tails.meets for tails in self.today], axis=0)
        self.outlooks = self._outlooks(P, _undecided(p))
        self.greedy = LazyGreedy(EdgeCriterion(self.outlooks, self.targets), len(self.frame))
        self.best: tuple[Outlook, ...] = ()

    def _outlooks(self, P: Array, watched: NDArray[np.intp]) -> tuple[Outlook, ...]:
        definition = self.view.study.definition
        new = self.frame.assign(plate="new")
        outlooks = []
        for response in self.responses:
            shared = shared_by(definition, response)
            outlooks.append(
                Outlook(
                    self.view.surfaces[response.name].lightened(_NODES),
                    P,
                    self.X,
                    tuple(_future_groups(definition, new, by) for by in shared.inside),
                    tuple(_future_groups(definition, new, by) for by in shared.scale),
                    watched,
                    self.setting,
                )
            )
        return tuple(outlooks)

    def turn(self, aim: Aim, number: int) -> Literal["edge", "best"]:
        """What the next pick is for; `both` takes turns."""
        if aim == "both":
            return "edge" if number % 2 == 0 else "best"
        return aim

    def choose(self, purpose: Literal["edge", "best"], new: bool) -> int:
        """The best candidate now; without `new` among those already in the plan."""
        open_wells = self.levels.open()
        if not new and self.taken:
            open_wells = np.isin(np.arange(len(self.frame)), self.taken)
        if purpose == "edge":
            return self.greedy.best(open_wells)
        if not self.best:
            self.best = self._outlooks(self.X, np.zeros(0, dtype=np.intp))
            for candidate in self.taken:
                for outlook in self.best:
                    outlook.pick(candidate)
        names = list(self.frame.columns)
        ran = pd.DataFrame([r.values for r in self.run], columns=names)
        X = code(self.view.study.definition, ran) if len(ran) else self.X[:0]
        values = BestCriterion(self.best, self.targets, X).values(self.taken)
        count = np.bincount(self.taken, minlength=len(values))
        rested = open_wells & (count < _MOST_REPEATS)
        return int(np.argmax(np.where(rested if rested.any() else open_wells, values, -np.inf)))

    def take(self, candidate: int) -> None:
        """Put a well at a candidate into the plan."""
        for outlook in (*self.outlooks, *self.best):
            outlook.pick(candidate)
        self.taken.append(candidate)
        self.levels.use(candidate)

    def forecast(self) -> float:
        """Expected wrong share with the wells taken so far read."""
        return wrong_share(self.outlooks, self.today)


def _undecided(p: Array) -> NDArray[np.intp]:
    """Judged points whose verdict is open, at most _WATCHED spread evenly among them; all others
    add nothing to the criterion.
    """
    still_open = np.flatnonzero(p * (1.0 - p) > _DECIDED)
    watched = still_open if len(still_open) >= 10 else np.arange(len(p))
    if len(watched) <= _WATCHED:
        return watched
    return watched[np.round(np.linspace(0, len(watched) - 1, _WATCHED)).astype(int)]


def _future_groups(
    definition: Definition, new: pd.DataFrame, by: tuple[str, ...]
) -> NDArray[np.intp]:
    """Groups on the new plate; a column that only the run plates know is the plate's own."""
    known = tuple(name for name in by if name in new)
    return group_numbers(definition, new, known or ("plate",))
