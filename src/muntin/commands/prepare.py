"""`muntin prepare`: how do I run it?"""

from __future__ import annotations

from typing import Annotated

import typer

from muntin.commands.shared import By, Folder, Output, Tell, command

_Plan = Annotated[
    str | None,
    typer.Argument(
        metavar="[PLAN]",
        help="a plan in plans/ by name, or a file; the latest of the next plate where absent",
        show_default=False,
    ),
]


@command
def prepare(folder: Folder, tell: Tell, plan: _Plan = None, by: By = None) -> Output:
    """Make the sheets of a plan as it stands: plate map, recipes, transfer list, totals, checklist.

    They go to sheets/ under the name of the plan; stocks and pipette are those of [bench].
    """
    from muntin.bench.sheets import prepare as prepare_plan
    from muntin.record import open_study
    from muntin.record.entries import entry_for
    from muntin.record.writing import writing
    from muntin.report.prepare_text import sheets_facts, sheets_screen
    from muntin.report.sheet_files import sheet_files, sheets_folder, sheets_replaced

    tell("reading the study and the plan")
    sheets = prepare_plan(open_study(folder), plan)
    tell("drawing and writing")
    files, place = sheet_files(sheets), sheets_folder(sheets)
    settings = {"plan": sheets.file, "plan_sha256": sheets.digest}
    entry = entry_for(sheets.study, "prepare", settings, by=by)
    with writing(sheets.study.folder) as pen:
        removed, remark = sheets_replaced(place, files)
        pen.commit({place / name: content for name, content in files.items()}, entry, removed)
    names = [*files]
    screen = sheets_screen(sheets, place, names, remark)
    return Output(sheets_facts(sheets, place, names, remark), screen, remarks=pen.remarks)
