"""The reference as one page of Markdown."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from itertools import groupby

from muntin.reference.entry import Entry
from muntin.reference.screen import details_text

_HEAD = """\
# Reference

Every command, option, key, column and JSON field. Generated from their declarations by
`python -m tests.reference.write`; `muntin help NAME` tells the same, name by name. `<factor>`,
`<response>` and so on stand for the names of a study.

- [Commands](#commands)
- [Keys](#keys)
- [Tables](#tables)
- [JSON fields](#json-fields)
"""
_JSON = """\
What `--json` prints, one document a command. A field is named by its path: `window.share` lies in
`window`, `checks[].name` in each entry of `checks`. `advise` also writes its document to
`advice/<plate>/<revision>/advice.json`. What is not known is null.
"""


def reference_text(entries: Sequence[Entry]) -> str:
    """Return the page."""
    lines = [
        _HEAD,
        "## Commands\n",
        *_commands(entries),
        "## Keys\n",
        *_holders(entries, "section", "key"),
        "## Tables\n",
        *_holders(entries, "table", "column"),
        "## JSON fields\n",
        _JSON,
        *_fields(entries),
    ]
    return "\n".join(lines)


def _commands(entries: Sequence[Entry]) -> Iterator[str]:
    for entry in entries:
        if entry.kind == "command":
            yield f"### muntin {entry.name}\n"
            yield f"`{entry.more['usage']}`: {entry.more['asks']}\n"
            yield f"{entry.says}\n"
            own = [e for e in entries if e.kind in ("argument", "option") and e.of == entry.name]
            yield from _rows(own, ("name", "what it does", "values"))


def _holders(entries: Sequence[Entry], holder: str, part: str) -> Iterator[str]:
    for entry in entries:
        if entry.kind == holder:
            yield f"### `{entry.name}`\n"
            yield f"{entry.says[:1].upper()}{entry.says[1:]}.\n"
            own = [
                e
                for e in entries
                if e.kind == part and (e.of == entry.name or e.of.startswith(f"{entry.name} "))
            ]
            wide = any(e.more for e in own)
            yield from _rows(own, (part, "what it is", *(["values"] if wide else [])))


def _fields(entries: Sequence[Entry]) -> Iterator[str]:
    fields = [e for e in entries if e.kind == "field"]
    for documents, own in groupby(fields, key=lambda e: e.of):
        yield f"### {documents}\n"
        yield from _rows([*own], ("field", "what it is"))


def _rows(entries: Iterable[Entry], headings: Sequence[str]) -> Iterator[str]:
    yield f"| {' | '.join(headings)} |"
    yield f"| {' | '.join('---' for _ in headings)} |"
    for entry in entries:
        inner = entry.of.split(" ", 1)[1] + " " if entry.kind == "key" and " " in entry.of else ""
        cells = [f"`{inner}{entry.name}`", _cell(entry.says), _cell(details_text(entry))]
        yield f"| {' | '.join(cells[: len(headings)])} |"
    yield ""


def _cell(text: str) -> str:
    """Text that stays in its cell: no bar, and no <name> that would pass for a tag."""
    return text.replace("|", "\\|").replace("<", "&lt;")
