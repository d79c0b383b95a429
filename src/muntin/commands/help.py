"""`muntin help`: what does a name mean?"""

from __future__ import annotations

from dataclasses import asdict
from typing import Annotated, Any

import typer

from muntin.commands.shared import Output, command

_Name = Annotated[
    str | None,
    typer.Argument(
        metavar="[NAME]",
        help="a command, [section], key, table, column, JSON field, or an option without its "
        "dashes; all there is where absent",
        show_default=False,
    ),
]


@command
def help(name: _Name = None) -> Output:  # noqa: A001 - the name of the command
    """Tell what a command, option, section, key, table, column or JSON field means."""
    from muntin.reference.lookup import all_entries, found
    from muntin.reference.screen import entry_screen, overview_screen

    entries = all_entries()
    told = [*entries] if name is None else found(name, entries)
    if name is not None and not told:
        _refuse(name, entries)
    facts: dict[str, Any] = {"command": "help", "name": name, "found": [asdict(e) for e in told]}
    screen = overview_screen(entries) if name is None else entry_screen(told, entries)
    return Output(facts, screen)


def _refuse(name: str, entries: Any) -> None:
    from muntin.record.faults import Fault, StudyFaults, quoted
    from muntin.reference.lookup import nearest_names

    near = nearest_names(name, entries)
    hint = f"near to it: {', '.join(near)}" if near else "muntin help lists what there is"
    fault = Fault(
        file="muntin help", value=quoted(name), problem="is not in the reference", hint=hint
    )
    raise StudyFaults([fault])
