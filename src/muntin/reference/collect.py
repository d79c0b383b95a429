"""All entries of the reference, collected from the declarations."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from typing import Any

from muntin.reference.commands import command_entries
from muntin.reference.documents import PARTS
from muntin.reference.entry import Entry
from muntin.reference.keys import key_entries
from muntin.reference.tables import SHEETS


def collect(commands: Mapping[Callable[..., Any], str]) -> tuple[Entry, ...]:
    """Return every entry; `commands` are those of the command line, each with its question."""
    return (*command_entries(commands), *key_entries(), *_table_entries(), *_field_entries())


def _table_entries() -> Iterator[Entry]:
    for sheet in SHEETS:
        yield Entry(kind="table", name=sheet.file, says=sheet.says)
        for name, says in sheet.columns.items():
            yield Entry(kind="column", name=name, says=says, of=sheet.file)


def _field_entries() -> Iterator[Entry]:
    for part in PARTS:
        for name, says in part.fields.items():
            yield Entry(kind="field", name=name, says=says, of=", ".join(part.documents))
