"""`muntin uptake`: how long must load and resin be in contact?"""

from __future__ import annotations

from typing import Annotated, Any

import typer

from muntin.commands.shared import By, Folder, Output, Tell, command

TableName = Annotated[
    str | None,
    typer.Argument(metavar="[TABLE]", help="one table of uptake/, by name or path; all by default"),
]
At = Annotated[
    float | None,
    typer.Option(metavar="MIN", help="planned contact time in min, in place of planned_min"),
]


@command
def uptake(
    folder: Folder, tell: Tell, table: TableName = None, at: At = None, by: By = None
) -> Output:
    """Judge uptake curves: load at equilibrium, time to 90 and 95 % of it, load at a planned time.

    A table has time_min and load (mg/mL resin) or liquid (mg/mL), and if you have it sd and
    exclude. Figures go to uptake/figures.
    """
    from muntin.assay.uptake import judge_uptake
    from muntin.assay.uptake_priors import priors_of
    from muntin.assay.uptake_remarks import uptake_remarks
    from muntin.assay.uptake_table import planned_time, read_curves, uptake_paths
    from muntin.record import open_study
    from muntin.record.entries import entry_for
    from muntin.record.inputs import hashes, read_inputs
    from muntin.record.writing import writing
    from muntin.report.figures import saved
    from muntin.report.uptake_facts import priors_facts, uptake_facts
    from muntin.report.uptake_figure import draw_uptake
    from muntin.report.uptake_text import uptake_screen

    tell("reading the study")
    study = open_study(folder)
    keys, title = study.definition.uptake, study.definition.title
    planned = planned_time(keys, at)
    curves = read_curves(study.folder, keys, table)
    priors = priors_of(keys)
    tables = {f"uptake: {p.name}": p.read_bytes() for _, p in uptake_paths(study.folder, table)}
    inputs = hashes({**read_inputs(study.folder), **tables})
    judged, files = [], {}
    for curve in curves:
        tell(f"judging {curve.name}")
        known = judge_uptake(curve, priors)
        judged.append((known, uptake_remarks(known, keys.phase_ratio, planned)))
        path = study.folder / "uptake" / "figures" / f"{curve.name}.png"
        files[path] = saved(draw_uptake(title, known, planned), "png")
    settings = {"planned_min": planned, "phase_ratio": keys.phase_ratio}
    with writing(study.folder) as pen:
        pen.commit(files, entry_for(study, "uptake", settings, by=by, inputs=inputs))
    facts: dict[str, Any] = {
        "command": "uptake",
        "settings": settings,
        "priors": priors_facts(priors),
        "curves": [uptake_facts(known, remarks, planned) for known, remarks in judged],
        "files": [str(path) for path in files],
    }
    return Output(facts, uptake_screen(title, judged, planned, [*files]), remarks=pen.remarks)
