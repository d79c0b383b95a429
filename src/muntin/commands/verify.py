"""`muntin verify`: can I reproduce it?"""

from __future__ import annotations

from typing import Annotated

import typer

from muntin.commands.shared import Folder, Output, Tell, command

_Recompute = Annotated[
    bool,
    typer.Option("--recompute/--no-recompute", help="compute advice again, or hold hashes only"),
]


@command
def verify(folder: Folder, tell: Tell, recompute: _Recompute = True) -> Output:
    """Recompute recorded advice from its copied inputs, and name whatever differs on record.

    Exit code 0: clean; 1: something differs; 2: there is no study to verify.
    """
    from muntin.report.verify_text import verify_facts, verify_screen
    from muntin.verify import TOLERANCE
    from muntin.verify import verify as hold

    found = hold(folder, recompute=recompute, tell=tell)
    code = 0 if found.clean else 1
    return Output(verify_facts(found, TOLERANCE), verify_screen(found, TOLERANCE), code)
