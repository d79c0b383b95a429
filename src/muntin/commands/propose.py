"""`muntin propose`: what do I run next?"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from muntin.commands.shared import (
    Aim,
    AimOption,
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
    from muntin.bench.plan import Plan
    from muntin.record import Study

_Wells = Annotated[
    int | None,
    typer.Option(
        min=1,
        help="test wells of the next plate, others come on top (24; with --keep those of the file)",
    ),
]
_Keep = Annotated[
    Path | None,
    typer.Option(
        metavar="FILE",
        help="an edited plan: its rows stay, are scored again, and filled up to --wells",
    ),
]
_Because = Annotated[
    str | None, typer.Option(metavar="TEXT", help="with --keep: why it was edited")
]


@command
def propose(
    folder: Folder,
    seed: int,
    tell: Tell,
    wells: _Wells = None,
    keep: _Keep = None,
    by: By = None,
    because: _Because = None,
    aim: AimOption = Aim.edge,
    surrogate: SurrogateOption = Surrogate.stacked,
    engine: EngineOption = Engine.fast,
) -> Output:
    """Plan the next plate: conditions at final wells, each with a reason; write it to plans/."""
    from muntin.bench.plan import check_plan
    from muntin.bench.plan import propose as plan_next
    from muntin.record import open_study
    from muntin.report.facts import plan_facts, study_facts
    from muntin.report.text import propose_screen
    from muntin.window.assessment import assess

    _check_words(keep, because)
    tell("reading the study")
    study = open_study(folder)
    check_plan(study, wells, keep)
    bar = tell.fitting(engine)
    view = assess(study, surrogate=surrogate.value, engine=engine.value, seed=seed, progress=bar)
    tell("planning the next plate")
    plan = plan_next(view, wells=wells, aim=aim.value, seed=seed, keep=keep)
    settings = {
        "wells": int((plan.wells["role"] == "test").sum()),
        "aim": aim.value,
        "surrogate": surrogate.value,
        "engine": engine.value,
        "seed": seed,
    }
    files = _written(study, plan, settings, by, because)
    facts = {
        "command": "propose",
        "settings": settings,
        "study": study_facts(study),
        "plan": plan_facts(study, plan),
        "files": files,
    }
    screen = propose_screen(view, plan, Path(files["plan"]), files["remark"])
    return Output(facts, screen)


def _check_words(keep: Path | None, because: str | None) -> None:
    """Raise StudyFaults where words on an edit are given, and no edited plan."""
    from muntin.record import Fault, StudyFaults

    if because is not None and keep is None:
        problem = "tells of an edited plan; name it with --keep"
        raise StudyFaults([Fault(file="muntin propose", value="--because", problem=problem)])


def _written(
    study: Study, plan: Plan, settings: dict[str, Any], by: str | None, because: str | None
) -> dict[str, Any]:
    """Write the plan, and the record of what was changed in it; return where, and a remark."""
    from muntin.record.edits import record_path
    from muntin.record.entries import entry_for
    from muntin.record.inputs import hashes, read_inputs
    from muntin.record.study import stop_file
    from muntin.record.writing import writing
    from muntin.report.edit_record import edit_text
    from muntin.report.plan_files import edited_path, plan_files, plan_path, plan_table_text
    from muntin.report.ruling_text import decision_facts

    text = plan_table_text(study.definition, plan)
    inputs = hashes(read_inputs(study.folder))
    decision = decision_facts(plan)
    if plan.edit is not None:
        decision |= {"edited": plan.edit.kept.file, "because": because}
    entry = entry_for(
        study, "propose", settings, seed=plan.seed, by=by, inputs=inputs, decision=decision
    )
    with writing(study.folder) as pen:
        if plan.edit is None:
            path, remark = plan_path(study.folder, plan.plate, text)
            pen.commit({**plan_files(path, text), **stop_file(study)}, entry)
            return {"plan": str(path), "remark": " ".join([*pen.remarks, remark]).strip()}
        path = edited_path(study.folder, plan.plate)
        told = edit_text(study, plan, plan.edit, path, text, by=by, because=because, inputs=inputs)
        record = record_path(path)
        pen.commit({record: told, **plan_files(path, text), **stop_file(study)}, entry)
    own = f"{plan.plate}.csv"
    remarks = [*pen.remarks]
    if path.name != own:
        remarks.append(f"Rename it to {own} when you move it to plates/.")
    return {"plan": str(path), "record": str(record), "remark": " ".join(remarks)}
