"""Entries looked up by name, from the file that is generated from the declarations.

The file saves every look-up from importing what it tells of.
"""

from __future__ import annotations

import difflib
from collections.abc import Sequence
from importlib.resources import files

from muntin.reference.entry import Entry, read_entries

FILE = "entries.jsonl"
_MOST_NEAR = 5


def all_entries() -> tuple[Entry, ...]:
    """Return every entry, in the order of the reference."""
    return read_entries(files("muntin.reference").joinpath(FILE).read_text(encoding="utf-8"))


def found(name: str, entries: Sequence[Entry]) -> list[Entry]:
    """Return the entries that bear a name, else those whose pattern it fits, in their order.

    Capitals and the [] of fields make no difference. The brackets of a section and the dashes of an
    option may be left out; given, they ask for a section or an option alone, where there is one.
    """
    asked = _plain(name)
    exact = [entry for entry in entries if asked in entry.names()]
    for mark, kind in (("[", "section"), ("--", "option")):
        if name.strip().startswith(mark):
            exact = [entry for entry in exact if entry.kind == kind] or exact
    return exact or [entry for entry in entries if entry.fits(asked)]


def parts_of(entry: Entry, entries: Sequence[Entry]) -> list[Entry]:
    """Return what belongs to a command, section, table or field: its options, keys, columns, or the
    fields right below it.
    """
    if entry.kind == "field":
        below = (f"{entry.name}.", f"{entry.name}[].")
        return [
            e
            for e in entries
            if e.kind == "field"
            and e.of == entry.of
            and any(e.name.startswith(start) and "." not in e.name[len(start) :] for start in below)
        ]
    kinds = {"command": ("argument", "option"), "section": ("key",), "table": ("column",)}
    inner = kinds.get(entry.kind, ())
    return [e for e in entries if e.kind in inner and e.of == entry.name]


def nearest_names(name: str, entries: Sequence[Entry]) -> list[str]:
    """Return the known names that resemble an unknown one, the nearest first."""
    shown: dict[str, str] = {}
    for entry in entries:
        for own in entry.names():
            if "." not in own or "/" in own:
                shown.setdefault(own, own)
    close = difflib.get_close_matches(_plain(name), shown, n=_MOST_NEAR, cutoff=0.6)
    return [shown[own] for own in close]


def _plain(name: str) -> str:
    asked = " ".join(name.split()).casefold().removeprefix("muntin ")
    return asked.replace("[]", "").strip("[]") or asked
