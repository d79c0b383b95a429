"""What is handed over of a window: ranges that hold together, set point, edge, and what a repeat of
it is expected to bring.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import pandas as pd

from muntin.window.limiting import End

if TYPE_CHECKING:
    from muntin.window.assessment import Assessment

Condition = dict[str, object]
Ranges = dict[str, tuple[object, object]]
DRAWS = 1000


@dataclass(frozen=True, kw_only=True)
class Box:
    """Factor ranges that hold together, raw units; a choice is held (low and high are the same).

    least, least_at: the lowest judged probability in them and its condition. assurance:
    probability that what the study is judged by holds at every condition of the box at once (the
    process mean meets all targets; or, of wells, the share of new wells that pass reaches the
    required probability). mean_everywhere: probability that the process mean meets all targets at
    every condition at once. share: of the factors' ranges, choices held. conditions: how many were
    judged one by one; every: whether these are all its bench steps.
    """

    ranges: Ranges
    least: float
    least_at: Condition
    assurance: float
    mean_everywhere: float
    share: float
    conditions: int
    every: bool


@dataclass(frozen=True, kw_only=True)
class Margin:
    """How far the edge lies from the set point along one factor, the others held there.

    edge: where the judged probability falls to the required one (raw unit), distance: from the set
    point to it (raw unit, not negative); both None where the range ends first, which it does at
    `end_of_range`, or `limited`: where a limit of the study does.
    """

    factor: str
    end: End
    edge: float | None
    distance: float | None
    end_of_range: float
    limited: bool = False


@dataclass(frozen=True, kw_only=True)
class Corner:
    """One corner of the set point's tolerance: condition (raw units), and there probability that a
    new well passes, p_well, and that the process mean does, p_mean.
    """

    condition: Condition
    p_well: float
    p_mean: float


@dataclass(frozen=True, kw_only=True)
class Repeat:
    """What repeating a condition is expected to bring, for one response, in the user's unit.

    response: its name. read: the reading that looked best (nearest its target's good side) among
    the wells run, with plate, well and condition. expected, low, high: mean and central 95 % of a
    new well's reading there, on a new plate. drop: what a repeat is expected to lose, read less
    expected where high is good, expected less read where low is.
    """

    response: str
    plate: str
    well: str
    condition: Condition
    read: float
    expected: float
    low: float
    high: float
    drop: float


@dataclass(frozen=True, kw_only=True)
class Optimism:
    """What may be too good in a set point chosen because it looked best.

    probability: the judged one of the set point; low, high: its central 95 % over joint posterior
    draws of the surface. best_run: the wells that looked best, a record a judged response read.
    wells: repeats proposed at the set point on a new plate; expected_passes: how many of them are
    expected to pass. readings: what these are expected to read, a row a judged response: response
    (name), mean, low, high (central 95 % of one new well, user's unit).
    """

    probability: float
    low: float
    high: float
    best_run: tuple[Repeat, ...]
    wells: int
    expected_passes: float
    readings: pd.DataFrame


@dataclass(frozen=True, kw_only=True, eq=False)
class HandOver:
    """A window in ranges and conditions.

    setpoint: condition of the highest judged probability (raw units), and probability: that. box:
    the largest ranges in which every condition reaches the required probability; None where no
    condition does. holds_setpoint: whether the set point lies in them; around: else the largest
    that do, or None. assured: the largest ranges within `box` whose assurance reaches
    `asked_assurance`; None where none do. margins: a record for every side of every factor with a
    range. corners: of the set point's tolerance, worst first; empty where nothing has kept_within.

    edge: conditions at which the judged probability crosses the required one. Columns: the factors
    with the condition of the crossing (raw unit); factor, the one that is moved across; end, "low"
    or "high", the end of the window that it is; low and high, its central 95 % over posterior
    draws, None (NaN) where the edge of more than 2.5 % of the draws lies outside the range; found,
    share of the draws that have an edge there. optimism: see there. draws, seed: of what was drawn.
    """

    setpoint: Condition
    probability: float
    required: float
    judged_by: str
    asked_assurance: float
    box: Box | None
    holds_setpoint: bool
    around: Box | None
    assured: Box | None
    margins: tuple[Margin, ...]
    corners: tuple[Corner, ...]
    edge: pd.DataFrame
    optimism: Optimism
    draws: int
    seed: int


def hand_over(
    view: Assessment, assurance: float | None = None, draws: int = DRAWS, seed: int | None = None
) -> HandOver | None:
    """The hand-over of a study's window; None before any judged response was read.

    assurance: required of the whole box at once, the study's required_probability where None.
    seed: that of the assessment where None. The same seed gives the same numbers.
    """
    raise NotImplementedError
