"""`muntin advise`: all of it, between two plates."""

from __future__ import annotations

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

Because = Annotated[
    str | None,
    typer.Option(metavar="TEXT", help="why what earlier advice rested on was changed; with --by"),
]


@command
def advise(
    folder: Folder,
    seed: int,
    tell: Tell,
    wells: Wells = 24,
    aim: AimOption = Aim.edge,
    surrogate: SurrogateOption = Surrogate.stacked,
    engine: EngineOption = Engine.fast,
    by: By = None,
    because: Because = None,
) -> Output:
    """Check, assess and plan; write the plan to plans/ and all of it to advice/."""
    from muntin.advise import advise as advise_on
    from muntin.report.text import advice_screen

    advice = advise_on(
        folder,
        wells=wells,
        aim=aim.value,
        surrogate=surrogate.value,
        engine=engine.value,
        seed=seed,
        by=by,
        because=because,
        tell=tell,
        progress=tell.bar,
    )
    return Output(
        advice.facts, advice_screen(advice.view, advice.window, advice.plan, advice.place)
    )
