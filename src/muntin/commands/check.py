"""`muntin check`: are my files sound?"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from muntin.commands.shared import Folder, Output, command

if TYPE_CHECKING:
    from muntin.record import Study

_Out = Annotated[
    Path | None,
    typer.Option(metavar="TABLE", help="where to write the wells as they were read (.csv)"),
]


def _reach(study: Study) -> str:
    if not study.definition.bench.held:
        return ""
    from muntin.bench.reach import reach_notice

    return reach_notice(study.definition)


@command
def check(folder: Folder, out: _Out = None) -> Output:
    """Read a study and name every fault at once: file, row or well, column and the mend."""
    from muntin.commands.conditions import check_out, write_table
    from muntin.record import open_study
    from muntin.record.column_runs import read_columns
    from muntin.record.wells_table import as_read
    from muntin.report.column_text import columns_line
    from muntin.report.edit_record import plans_on_record
    from muntin.report.facts import study_facts
    from muntin.report.text import check_screen

    study = open_study(folder, checking=True)
    if out is not None:
        check_out(out, None, study.folder)
    lines, plans = plans_on_record(study)
    columns = read_columns(study.folder, study.definition)
    reach = _reach(study)
    if out is not None:
        write_table(as_read(study.definition, study.wells), out)
    facts = {
        "command": "check",
        "study": study_facts(study),
        "stocks": reach,
        "plans": plans,
        "columns": {
            "planned": sum(len(plan.runs) for plan in columns.plans),
            "made": len(columns.made),
            "notices": columns.notices,
        },
        "out": None if out is None else str(out),
    }
    written = [] if out is None else [f"{out}: the wells as they were read"]
    screen = check_screen(study, [*lines, *columns_line(columns)], reach, written)
    return Output(facts, screen)
