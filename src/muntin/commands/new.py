"""`muntin new`: where do I start?"""

from __future__ import annotations

from typing import Annotated

import typer

from muntin.commands.shared import Folder, Output, command


@command
def new(
    folder: Folder,
    factors: Annotated[int, typer.Option(min=1, max=6, help="factors of the example")] = 2,
) -> Output:
    """Write a commented study.toml and an empty plate table into a new folder."""
    from muntin.record import new_study
    from muntin.report.text import new_screen

    written = new_study(folder, factors)
    facts = {"command": "new", "files": [str(path) for path in written]}
    return Output(facts, new_screen(folder, written))
