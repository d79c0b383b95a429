"""Column runs planned: conditions within the reserved protein, and their predictions."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime

import pandas as pd

from muntin.confirmation.places import Spot, spots
from muntin.confirmation.prediction import predictions
from muntin.confirmation.protein import run_mg, within_reserve
from muntin.record.column_plan import ColumnPlan, PlannedRun, next_run
from muntin.record.column_runs import ColumnRun
from muntin.record.faults import Fault, StudyFaults, listed
from muntin.window.assessment import Assessment


@dataclass(frozen=True, kw_only=True)
class Basis:
    """What goes on record with a plan: hashes of the inputs, versions, why it was planned again."""

    inputs: Mapping[str, str]
    versions: Mapping[str, str]
    because: str | None = None


def plan_columns(
    view: Assessment, earlier: Sequence[ColumnPlan], made: Sequence[ColumnRun], basis: Basis
) -> ColumnPlan:
    """Return the set point and edges of the window as column runs, with what is predicted of them.

    `earlier` plans number the runs on, and the runs `made` used up protein. Raises StudyFaults
    where there is no window to confirm or the reserved protein reaches for no run. The hash of the
    table is left empty.
    """
    window = None if view.fresh else view.window()
    if window is None or window.unsupported or not window.grid["inside"].any():
        raise StudyFaults(_no_window(view))
    definition = view.study.definition
    offered, notices = within_reserve(definition, spots(definition, window), used(earlier, made))
    notices += _open(earlier, made)
    start = next_run(earlier)
    runs = tuple(_run(view, start + i, spot) for i, spot in enumerate(offered))
    conditions = pd.DataFrame([spot.condition for spot in offered])
    return ColumnPlan(
        written_at=datetime.now(UTC).isoformat(timespec="seconds"),
        seed=view.seed,
        surrogate=view.surrogate,
        engine=view.engine,
        because=basis.because,
        window_share=window.share,
        table_sha256="",
        notices=tuple(notices),
        versions=dict(basis.versions),
        inputs=dict(basis.inputs),
        runs=runs,
        predictions=tuple(predictions(view, conditions, view.seed)),
    )


def _run(view: Assessment, number: int, spot: Spot) -> PlannedRun:
    return PlannedRun(
        run=number,
        place=spot.place,
        condition=dict(spot.condition),
        probability=round(spot.probability, 8),
        protein_mg=run_mg(view.study.definition, spot),
    )


def _open(plans: Sequence[ColumnPlan], made: Sequence[ColumnRun]) -> list[str]:
    """A notice of runs that were planned before and not made."""
    numbers = {run.run for run in made}
    left = [str(run.run) for plan in plans for run in plan.runs if run.run not in numbers]
    if not left:
        return []
    if len(left) == 1:
        return [f"Run {left[0]} of an earlier plan is open; no protein is kept back for it."]
    return [f"Runs {listed(left)} of earlier plans are open; no protein is kept back for them."]


def used(plans: Sequence[ColumnPlan], made: Sequence[ColumnRun]) -> float:
    """Return the protein that runs which were made took, left out ones too, in mg."""
    numbers = {run.run for run in made}
    every = [run for plan in plans for run in plan.runs if run.run in numbers]
    return sum(run.protein_mg or 0.0 for run in every)


def _no_window(view: Assessment) -> list[Fault]:
    file = "muntin confirm"
    if view.fresh:
        return [Fault(file=file, problem="nothing has been read yet, so there is no window")]
    window = view.window()
    if window.unsupported:
        problem = "the data do not support the window:"
        return [Fault(file=file, problem=problem, allowed=why) for why in window.unsupported]
    required = view.study.definition.required_probability
    problem = f"no condition reaches a probability of {required:g}, so there is no window"
    return [Fault(file=file, problem=problem, hint="muntin propose plans further wells")]
