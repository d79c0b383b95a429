"""`muntin check`: are my files sound?"""

from __future__ import annotations

from muntin.commands.shared import Folder, Output, command


@command
def check(folder: Folder) -> Output:
    """Read a study and name every fault at once: file, row or well, column and the mend."""
    from muntin.bench.reach import reach_notice
    from muntin.record import open_study
    from muntin.record.column_runs import read_columns
    from muntin.report.column_text import columns_line
    from muntin.report.edit_record import plans_on_record
    from muntin.report.facts import study_facts
    from muntin.report.text import check_screen

    study = open_study(folder, checking=True)
    lines, plans = plans_on_record(study)
    columns = read_columns(study.folder, study.definition)
    reach = reach_notice(study.definition)
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
    }
    return Output(facts, check_screen(study, [*lines, *columns_line(columns)], reach))
