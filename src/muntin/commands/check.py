"""`muntin check`: are my files sound?"""

from __future__ import annotations

from muntin.commands.shared import Folder, Output, command


@command
def check(folder: Folder) -> Output:
    """Read a study and name every fault at once: file, row or well, column and the mend."""
    from muntin.record import open_study
    from muntin.report.edit_record import plans_on_record
    from muntin.report.facts import study_facts
    from muntin.report.text import check_screen

    study = open_study(folder)
    lines, plans = plans_on_record(study)
    facts = {"command": "check", "study": study_facts(study), "plans": plans}
    return Output(facts, check_screen(study, lines))
