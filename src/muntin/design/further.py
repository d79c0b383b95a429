"""What more wells would bring: the plan's, then more of its plate, then further plates.

One pass without a reading or a refit. The plan's own wells come first, in the order of choice.
Beyond them wells are picked for the edge from fewer candidates, first on what is left of the
plate, then on further plates, each with the same bridging wells and with plate errors of its own,
which its wells share and no other plate knows of.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from muntin.design.edge import EdgeCriterion, LazyGreedy
from muntin.design.forecast import Tails, wrong_share
from muntin.design.levels import Levels
from muntin.design.outlook import Outlook
from muntin.design.selection import Selection
from muntin.design.setpoint import set_points
from muntin.design.weighing import future_groups
from muntin.surrogate.nodes import Surface
from muntin.window.assessment import Assessment, target_of
from muntin.window.coded import SharedBy, code, setting_sd, shared_by
from muntin.window.predicted import Predicted
from muntin.window.probability import Target
from muntin.window.window import Window

Array = NDArray[np.float64]
Index = NDArray[np.intp]
_NODES = 8
_CANDIDATES = 240
_WATCHED = 300
_DECIDED = 1e-3


@dataclass(frozen=True, kw_only=True)
class Rooms:
    """Test wells that fit beside bridging wells and controls: on the next plate, of which wells
    may be in use already, and on each plate after it.
    """

    first: int
    further: int

    def plates(self, wells: int) -> int:
        """How many plates so many test wells take. Raises ValueError where they never fit."""
        if wells <= self.first:
            return int(wells > 0)
        if self.further < 1:
            raise ValueError(f"{wells} test wells do not fit")
        return 1 - (self.first - wells) // self.further


@dataclass(frozen=True, kw_only=True)
class Prospect:
    """What is expected once so many test wells are read: the share of the range that may still be
    called wrongly, the probability of the set point, and the chance that it reaches a limit.
    """

    wells: int
    wrong_share: float
    set_point: float
    reached: float


def prospects(
    view: Assessment,
    window: Window,
    selection: Selection,
    counts: Sequence[int],
    rooms: Rooms,
    limit: float,
) -> tuple[Prospect, ...]:
    """What so many test wells (ascending, first 0) would bring, those of the selection first.

    limit: the probability that the set point is to reach.
    """
    coming = _Coming(view, window, selection, max(1, rooms.plates(counts[-1])))
    wrong, read = [window.wrong_share], [0]
    for count in counts[1:]:
        while coming.tests < count:
            coming.next(count, rooms)
        wrong.append(wrong_share(coming.outlooks, coming.today))
        read.append(len(coming.taken))
    best = set_points(view, window, coming.outlooks, coming.taken, read, limit)
    return tuple(
        Prospect(wells=k, wrong_share=share, set_point=b.expected, reached=b.reached)
        for k, share, b in zip(counts, wrong, best, strict=True)
    )


@dataclass
class _Coming:
    """Candidates of the plates to come, a copy a plate, and the wells taken so far."""

    view: Assessment
    window: Window
    selection: Selection
    plates: int
    taken: list[int] = field(default_factory=list)
    tests: int = 0
    plate: int = -1

    def __post_init__(self) -> None:
        self._copies()
        definition = self.view.study.definition
        responses = [r for r in definition.judged if r.name in self.view.surfaces]
        targets = tuple(target_of(r) for r in responses)
        surfaces = [self.view.surfaces[r.name] for r in responses]
        P = code(definition, self.window.grid)
        self.today = _today(surfaces, P, targets, self.window)
        watched = _watched(np.prod([tails.meets for tails in self.today], axis=0))
        self.outlooks = tuple(
            self._outlook(surface, P, watched, shared_by(definition, response))
            for surface, response in zip(surfaces, responses, strict=True)
        )
        self.greedy = LazyGreedy(EdgeCriterion(self.outlooks, targets), len(self.frame))

    def _copies(self) -> None:
        """The candidates, some of those weighed and all of the plan, once for each plate."""
        definition, offered = self.view.study.definition, self.selection.offered
        picks = self.selection.picks
        may = np.flatnonzero(~offered.barred)
        may = may if len(may) else np.arange(len(offered.barred))
        spread = may[np.linspace(0, len(may) - 1, min(len(may), _CANDIDATES)).round().astype(int)]
        number = np.unique([*spread, *(pick.candidate for pick in picks)])
        own = {n: i for i, n in enumerate(number.tolist())}
        self.bridge = [own[p.candidate] for p in picks if p.role == "bridge"]
        self.reference = [own[p.candidate] for p in picks if p.role == "reference"]
        self.planned = [own[p.candidate] for p in picks if p.role == "test"]
        targets = offered.targets.iloc[number].reset_index(drop=True)
        actual = offered.actual.iloc[number].reset_index(drop=True)
        self.size, self.levels = len(targets), Levels(definition, targets)
        self.may = ~offered.barred[number]
        # What a stock measured holds for the plate that it was prepared for.
        every = [actual, *[targets] * (self.plates - 1)]
        copies = [frame.assign(plate=f"new {n}") for n, frame in enumerate(every)]
        self.frame = pd.concat(copies, ignore_index=True)
        self.measured = np.zeros((len(self.frame), len(definition.factors)), dtype=bool)
        self.measured[: self.size] = offered.measured[number]

    def _outlook(self, surface: Surface, P: Array, watched: Index, shared: SharedBy) -> Outlook:
        definition = self.view.study.definition
        return Outlook(
            surface.lightened(_NODES),
            P,
            code(definition, self.frame),
            tuple(future_groups(definition, self.frame, by) for by in shared.inside),
            tuple(future_groups(definition, self.frame, by) for by in shared.scale),
            watched,
            setting_sd(definition, self.frame, self.measured),
        )

    def next(self, count: int, rooms: Rooms) -> None:
        """Take the next test well, repeats of it up to `count` wells included; before the first
        of a plate its bridging wells.
        """
        plate = rooms.plates(self.tests + 1) - 1
        if plate > self.plate:
            self.plate, self.levels = plate, Levels(self.levels.definition, self.levels.frame)
            for well in [*self.bridge, *([] if plate else self.reference)]:
                self._take(well)
        if self.tests < len(self.planned):
            self._take(self.planned[self.tests])
            self.tests += 1
            return
        last = rooms.first + plate * rooms.further
        repeats = self.view.study.definition.plan.repeats_min
        chosen = self._choose()
        for _ in range(min(repeats, count - self.tests, last - self.tests)):
            self._take(chosen)
            self.tests += 1

    def _choose(self) -> int:
        """The well of the plate, as a number within it, that would tell most about the edge."""
        open_wells = np.zeros(len(self.frame), dtype=bool)
        start = self.plate * self.size
        within = self.levels.open()
        # A plan whose rows are all kept may leave nothing else that may be chosen.
        within &= self.may if (within & self.may).any() else True
        open_wells[start : start + self.size] = within
        return self.greedy.best(open_wells) - start

    def _take(self, well: int) -> None:
        at = self.plate * self.size + well
        for outlook in self.outlooks:
            outlook.pick(at)
        self.levels.use(well)
        self.taken.append(at)


def _today(
    surfaces: Sequence[Surface], P: Array, targets: Sequence[Target], window: Window
) -> list[Tails]:
    """Chances today at the judged points; those of a single limit stand in the window."""
    if len(targets) == 1 and np.isinf([targets[0].low, targets[0].high]).any():
        p = window.grid["p_mean"].to_numpy(dtype=float)
        return [Tails(None, p) if np.isinf(targets[0].low) else Tails(p, None)]
    return [
        Tails.of(Predicted.of(surface, P, target, np.zeros_like(P)))
        for surface, target in zip(surfaces, targets, strict=True)
    ]


def _watched(p: Array) -> Index:
    """A few judged points, spread evenly among those whose verdict is open."""
    still_open = np.flatnonzero(p * (1.0 - p) > _DECIDED)
    points = still_open if len(still_open) >= 10 else np.arange(len(p))
    few = np.linspace(0, len(points) - 1, min(len(points), _WATCHED))
    return np.asarray(points[few.round().astype(int)], dtype=np.intp)
