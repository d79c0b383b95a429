"""`muntin assess`: where do I stand?"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from muntin.commands.shared import (
    Engine,
    EngineOption,
    Folder,
    Noise,
    NoiseOption,
    Output,
    Surrogate,
    SurrogateOption,
    Tell,
    command,
    sampler,
)

At = Annotated[Path | None, typer.Option(metavar="TABLE", help="conditions, a column a factor")]
Out = Annotated[
    Path | None,
    typer.Option(metavar="TABLE", help="where to write what is known there, or everywhere (.csv)"),
]
Influence = Annotated[
    bool, typer.Option("--influence", help="how much each factor moves each response")
]
Negligible = Annotated[
    float | None,
    typer.Option(
        metavar="SIZE", help="--influence, and how likely a factor moves a response by less than it"
    ),
]

Draws = Annotated[
    Path | None,
    typer.Option(metavar="DIR", help="where to write the draws of --engine nuts (netCDF)"),
]


@command
def assess(
    folder: Folder,
    seed: int,
    tell: Tell,
    at: At = None,
    out: Out = None,
    surrogate: SurrogateOption = Surrogate.stacked,
    engine: EngineOption = Engine.fast,
    noise: NoiseOption = Noise.normal,
    draws: Draws = None,
    influence: Influence = False,
    negligible: Negligible = None,
) -> Output:
    """Judge every condition of the range, or those of a table, and check the model."""
    from muntin.commands.conditions import (
        check_draws,
        check_noise,
        check_out,
        known_at,
        read_conditions,
        write_table,
    )
    from muntin.record import open_study
    from muntin.report.facts import records, standing_facts, study_facts
    from muntin.report.handover_text import handover_facts
    from muntin.report.influence_text import influence_facts, influence_lines
    from muntin.report.text import assess_screen
    from muntin.window.assessment import assess as judge
    from muntin.window.grid import judged_grid

    tell("reading the study")
    study = open_study(folder)
    conditions = None if at is None else read_conditions(at, study.definition)
    if out is not None:
        check_out(out, at, study.folder)
    if draws is not None:
        check_draws(draws, engine.value)
    check_noise(noise.value, engine.value)
    bar = tell.fitting(engine)
    view = judge(study, surrogate.value, sampler(engine, noise), seed, progress=bar)
    window = None if view.fresh else view.window()
    handed = None
    if window is not None and not window.unsupported:
        tell("judging the ranges to hand over")
        handed = view.handover()
    facts: dict[str, Any] = {
        "command": "assess",
        "settings": {
            "surrogate": surrogate.value,
            "engine": engine.value,
            "noise": noise.value,
            "seed": seed,
        },
    }
    facts |= {"study": study_facts(study), **standing_facts(view, window)}
    if handed is not None:
        facts["handover"] = handover_facts(study.definition, handed)
    known = None if conditions is None else known_at(view, conditions)
    if known is not None:
        facts["at"] = records(known)
    moved: list[Any] = []
    if influence or negligible is not None:
        tell("drawing surfaces for the influence of the factors")
        tables = {name: view.influence(name, negligible) for name in view.stacks}
        facts["influence"] = influence_facts(tables, negligible)
        moved = influence_lines(study, tables, negligible)
    if out is not None:
        everywhere = judged_grid(study.definition)[0]
        write_table(known_at(view, everywhere) if known is None else known, out)
        facts["files"] = [str(out)]
    kept = () if draws is None else view.save_draws(draws)
    if kept:
        facts["draws"] = [str(path) for path in kept]
    return Output(facts, assess_screen(view, window, known, out, moved, kept, handed))
