"""`muntin report`: can I hand it over?"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

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
    Wells,
    command,
)

_Out = Annotated[
    Path | None,
    typer.Option(
        metavar="FILE", help="where to write the page (.html); report/report.html where absent"
    ),
]


@command
def report(
    folder: Folder,
    seed: int,
    tell: Tell,
    out: _Out = None,
    wells: Wells = 24,
    aim: AimOption = Aim.edge,
    surrogate: SurrogateOption = Surrogate.stacked,
    engine: EngineOption = Engine.fast,
    by: By = None,
) -> Output:
    """Write one page to hand over: window, next plate, checks and where the numbers come from.

    It needs no network and no other file; its figures lie beside it as pictures for slides, its
    numbers as JSON. The next plate is the one that propose gives for the same options.
    """
    from muntin.record import open_study
    from muntin.record.entries import entry_for
    from muntin.report.advice_files import read_inputs
    from muntin.report.page.build import build_page, plan_or_reasons
    from muntin.report.page_files import check_place, page_place, write_page
    from muntin.report.page_text import page_screen
    from muntin.report.ruling_text import decision_facts
    from muntin.window.assessment import assess

    place = page_place(folder, out)
    tell("reading the study")
    study = open_study(folder)
    inputs = read_inputs(study.folder)
    check_place(folder, place)
    bar = tell.fitting(engine)
    view = assess(study, surrogate.value, engine.value, seed, progress=bar)
    tell("planning the next plate")
    plan, unplanned = plan_or_reasons(view, wells, aim.value, seed)
    settings = {
        "wells": wells,
        "aim": aim.value,
        "surrogate": surrogate.value,
        "engine": engine.value,
        "seed": seed,
    }
    page = build_page(
        view, plan, unplanned=unplanned, settings=settings, inputs=inputs, by=by, tell=tell
    )
    entry = entry_for(
        study,
        "report",
        {**settings, "out": None if out is None else str(out)},
        seed=seed,
        by=by,
        inputs=page.facts["inputs"],
        decision=None if plan is None else decision_facts(plan),
    )
    written = write_page(study.folder, place, page, entry)
    files = [str(path) for path in written.paths]
    facts = {**page.facts, "ledger": written.ledger, "files": files}
    return Output(facts, page_screen(page, study, written.paths), remarks=written.remarks)
