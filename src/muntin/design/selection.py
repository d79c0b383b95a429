"""The choice of a plate's conditions, pick by pick."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.bridging import bridging_conditions
from muntin.design.budget import Budget
from muntin.design.candidates import RunCondition, candidate_frame, run_conditions
from muntin.design.terms import Terms, Weighed, weighed
from muntin.design.weighing import Aim, Weighing
from muntin.record.definition import Definition
from muntin.window.assessment import Assessment

Array = NDArray[np.float64]
Held = list[tuple[int, str]]
# An opening plate of so many wells begins and ends with its centre: one repeat shows the noise.
_CENTRED = 8


@dataclass(frozen=True)
class Pick:
    """One well of the plan: the candidate's number, its role, and what it was picked for.

    held: the number of the held row that it is, None for a well that was chosen.
    """

    candidate: int
    role: Literal["test", "bridge", "reference"]
    purpose: Literal["edge", "best", "repeat", "pass", "fail"]
    held: int | None = None


@dataclass(frozen=True)
class Selection:
    """The conditions chosen for a plate.

    offered: the candidates; picks: the wells in order of choice, bridging and reference wells
    first; run: conditions that were run; forecast: expected wrong share after 0, 1, ... test wells,
    the first with nothing new read.
    """

    offered: Weighed
    picks: tuple[Pick, ...]
    run: tuple[RunCondition, ...]
    forecast: tuple[float, ...]

    @property
    def candidates(self) -> pd.DataFrame:
        """All conditions that were weighed (targets, raw units)."""
        return self.offered.targets

    @property
    def actual(self) -> pd.DataFrame:
        """The same at the values that the model uses."""
        return self.offered.actual


def select(
    view: Assessment, wells: int, aim: Aim, seed: int, terms: Terms | None = None
) -> Selection:
    """Choose bridging wells and so many test wells for the next plate, those that are held among
    them. Raises ProteinShortError and NoConditionLeftError.
    """
    terms = Terms() if terms is None else terms
    definition = view.study.definition
    run = () if view.fresh else run_conditions(view.study)
    offered = weighed(definition, candidate_frame(definition, run), terms)
    table = Weighing(view, offered, run, seed, _budget(definition, offered, terms))
    choosing = _Choosing(table, aim, wells)
    ties, tests = _held_rows(terms)
    for candidate in offered.held:
        # Bridging wells must do with the levels that test wells leave, too.
        table.levels.use(candidate)
    choosing.hold(ties)
    bridging = definition.plan.bridging_wells if terms.fill else 0
    choosing.bridge(_bridge(table, max(0, bridging - _count(ties, "bridge"))))
    choosing.hold(tests)
    table.settle(aim, choosing.left)
    choosing.fill(definition.plan.repeats_min)
    return Selection(offered, tuple(choosing.picks), run, tuple(choosing.forecast))


def _held_rows(terms: Terms) -> tuple[Held, Held]:
    """Numbers and roles of the held rows: those that tie plates, and the test wells."""
    roles = [] if terms.held is None else terms.held["role"].tolist()
    rows = [*enumerate(roles)]
    return [r for r in rows if r[1] != "test"], [r for r in rows if r[1] == "test"]


def _count(rows: Held, role: str) -> int:
    return sum(of == role for _, of in rows)


def _budget(definition: Definition, offered: Weighed, terms: Terms) -> Budget | None:
    protein = definition.protein
    if protein is None or protein.load_factor is None or terms.budget_mg is None:
        return None
    loads = offered.actual[protein.load_factor].to_numpy(dtype=float)
    return Budget(protein.well_mg(loads, definition.factors), terms.budget_mg)


@dataclass
class _Choosing:
    """The picks of a plan, and what they forecast, as they are made."""

    table: Weighing
    aim: Aim
    wells: int
    picks: list[Pick] = field(default_factory=list)
    forecast: list[float] = field(init=False)

    def __post_init__(self) -> None:
        self.forecast = [self.table.forecast()]

    @property
    def left(self) -> int:
        """Test wells still to be chosen."""
        return self.wells + 1 - len(self.forecast)

    def _add(self, pick: Pick) -> None:
        self.table.take(pick.candidate, held=pick.held is not None)
        self.picks.append(pick)
        if pick.role == "test":
            self.forecast.append(self.table.forecast())

    def hold(self, rows: Held) -> None:
        """Take held rows."""
        for row, role in rows:
            candidate = self.table.offered.held[row]
            before = any(p.candidate == candidate and p.role == "test" for p in self.picks)
            purpose = "repeat" if before and role == "test" else "edge"
            self._add(Pick(candidate, role, purpose, row))  # type: ignore[arg-type]

    def bridge(self, chosen: list[tuple[int, str]]) -> None:
        """Take bridging wells."""
        for candidate, kind in chosen:
            self._add(Pick(candidate, "bridge", "pass" if kind == "pass" else "fail"))

    def fill(self, repeats: int) -> None:
        """Choose the test wells that are left, each condition with its repeats."""
        self._repeat_held(repeats)
        opening = self.table.view.fresh and self.wells >= _CENTRED and self.left == self.wells
        while self.left:
            left = self.left
            purpose = self.table.turn(self.aim, len(self.forecast) - 1)
            open_wells = self.table.open(left, repeats)
            if opening and (left == self.wells or left <= repeats):
                chosen = _centre(self.table.X, open_wells)
            else:
                chosen = self.table.choose(purpose, new=left >= repeats, open_wells=open_wells)
            for number in range(min(repeats, left)):
                self._add(Pick(chosen, "test", purpose if number == 0 else "repeat"))

    def _repeat_held(self, repeats: int) -> None:
        """Bring held test conditions to their repeats, as far as the wells go."""
        count = Counter(pick.candidate for pick in self.picks if pick.role == "test")
        for candidate, there in count.items():
            for _ in range(min(repeats - there, self.left)):
                if self.table.open(self.left, 1)[candidate]:
                    self._add(Pick(candidate, "test", "repeat"))


def _centre(X: Array, open_wells: NDArray[np.bool_]) -> int:
    """The open candidate nearest to the middle of the coded range."""
    return int(np.argmin(np.where(open_wells, (X**2).sum(axis=1), np.inf)))


def _bridge(table: Weighing, wells: int) -> list[tuple[int, str]]:
    """Candidate numbers of the bridging wells; only conditions that may be run again."""
    frame = table.offered.targets
    may = table.levels.open() & ~table.offered.barred
    number = {row: i for i, row in enumerate(frame.itertuples(index=False, name=None)) if may[i]}
    again = [r for r in table.run if r.values in number]
    if not again or not wells:
        return []
    ran = frame.iloc[[number[r.values] for r in again]].reset_index(drop=True)

    def beside(first: int) -> NDArray[np.bool_]:
        return table.levels.over(ran).with_one([first]).open()

    chosen = bridging_conditions(again, table.view.judged(ran, "mean"), wells, beside)
    return [(number[again[i].values], kind) for i, kind in chosen]
