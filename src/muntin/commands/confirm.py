"""`muntin confirm`: do columns agree?"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from muntin.commands.shared import (
    By,
    Engine,
    EngineOption,
    Folder,
    Output,
    Surrogate,
    SurrogateOption,
    Tell,
    command,
)

if TYPE_CHECKING:
    from collections.abc import Sequence

    from muntin.record import Study
    from muntin.record.column_plan import ColumnPlan
    from muntin.record.column_runs import ColumnRun

    Known = tuple[Sequence[ColumnPlan], Sequence[ColumnRun]]

_Again = Annotated[
    bool,
    typer.Option("--again", help="plan further runs by what is known today; needs --because"),
]
_Because = Annotated[
    str | None, typer.Option(metavar="TEXT", help="with --again: why it is planned again")
]


@command
def confirm(
    folder: Folder,
    seed: int,
    tell: Tell,
    again: _Again = False,
    because: _Because = None,
    surrogate: SurrogateOption = Surrogate.stacked,
    engine: EngineOption = Engine.fast,
    by: By = None,
) -> Output:
    """Offer column runs at the set point and two edges of the window, and compare what they read.

    What is predicted is recorded in columns/ before the runs; readings go to columns/column-01.csv.
    """
    from muntin.confirmation.comparison import compare
    from muntin.record import open_study
    from muntin.record.column_runs import read_columns
    from muntin.report.column_facts import column_facts
    from muntin.report.column_files import since_plan
    from muntin.report.column_text import column_screen

    _check_words(again, because)
    tell("reading the study")
    study = open_study(folder)
    plans, made, found = read_columns(study.folder, study.definition)
    written: list[Path] = []
    remarks: list[str] = []
    if again or not plans:
        settings = {
            "again": again,
            "because": because,
            "surrogate": surrogate.value,
            "engine": engine.value,
            "seed": seed,
        }
        bar = tell.fitting(engine)
        plan, written, remarks = _planned(study, (plans, made), settings, by, bar)
        plans = [*plans, plan]
    notices = [*found, *since_plan(study.folder, plans[-1])]
    comparison = compare(study.definition.responses, plans, made)
    told = (study, plans, comparison, written, notices)
    return Output(column_facts(*told), column_screen(*told), remarks=remarks)


def _planned(
    study: Study, known: Known, settings: dict[str, Any], by: str | None, bar: bool
) -> tuple[ColumnPlan, list[Path], list[str]]:
    """Plan column runs and write them; return the plan, the paths, and remarks."""
    from muntin.confirmation.planning import Basis, plan_columns
    from muntin.record.entries import entry_for
    from muntin.record.inputs import hashes, read_inputs, versions
    from muntin.report.column_files import write_columns
    from muntin.window.assessment import assess

    plans, made = known
    inputs = hashes(read_inputs(study.folder))
    basis = Basis(inputs=inputs, versions=versions(), because=settings["because"])
    asked = settings["surrogate"], settings["engine"], settings["seed"]
    plan = plan_columns(assess(study, *asked, progress=bar), plans, made, basis)
    # The reason for planning again explains no change, so it stands among the settings.
    entry = entry_for(study, "confirm", settings, seed=settings["seed"], by=by, inputs=inputs)
    return write_columns(study.folder, study.definition, plan, len(plans), entry)


def _check_words(again: bool, because: str | None) -> None:
    from muntin.record.cells import CellError, parse_reason
    from muntin.record.faults import Fault, StudyFaults, quoted

    if because is not None and not again:
        problem = "is read only with --again"
        raise StudyFaults([Fault(file="muntin confirm", value="--because", problem=problem)])
    if not again:
        return
    try:
        if parse_reason((because or "").strip()):
            return
        problem = "needs --because TEXT: why it is planned again"
        fault = Fault(file="muntin confirm", value="--again", problem=problem)
    except CellError as error:
        given, hint = f"--because {quoted(because)}", "say in words why it is planned again"
        fault = Fault(file="muntin confirm", value=given, problem=str(error), hint=hint)
    raise StudyFaults([fault])
