"""`muntin check`: are my files sound?"""

from __future__ import annotations

from muntin.commands.shared import Folder, Output, command


@command
def check(folder: Folder) -> Output:
    """Read a study and name every fault at once: file, row or well, column and the mend."""
    from muntin.record import open_study
    from muntin.report.facts import study_facts
    from muntin.report.text import check_screen

    study = open_study(folder)
    return Output({"command": "check", "study": study_facts(study)}, check_screen(study))
