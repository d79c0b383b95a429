"""The reference on the screen, at most 80 columns wide."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING

from muntin.reference.entry import Entry
from muntin.reference.lookup import parts_of

if TYPE_CHECKING:
    from rich.console import RenderableType
    from rich.text import Text

WIDTH = 80
_NAMES = 34
_LABELS = {
    "argument": "argument of muntin {of}",
    "option": "option of muntin {of}",
    "key": "key of {of}",
    "column": "column of {of}",
    "field": "JSON: {of}",
    "table": "table",
    "command": "command",
}
_ASK = (
    "muntin help NAME tells of any of these, and of every option, key, column and JSON field by "
    "its name: muntin help kept_within."
)


def overview_screen(entries: Sequence[Entry]) -> RenderableType:
    """Return what there is: commands, sections, tables, and how to ask."""
    commands = [(e.name, e.more["asks"]) for e in entries if e.kind == "command"]
    sections = [(e.name, e.says) for e in entries if e.kind == "section"]
    tables = [(e.name, e.says) for e in entries if e.kind == "table"]
    parts: list[RenderableType] = []
    for heading, rows in (
        ("Commands", commands),
        ("Keys, by table", sections),
        ("Tables", tables),
    ):
        parts += [_bold(heading), _pairs(rows), _text("")]
    return _narrow([*parts, _text(_ASK)])


def entry_screen(found: Sequence[Entry], entries: Sequence[Entry]) -> RenderableType:
    """Return what a name means, place by place; with one or two places also what belongs there."""
    parts: list[RenderableType] = []
    whole = [e for e in found if e.kind not in ("key", "column", "argument", "option")]
    for number, entry in enumerate(_merged(found)):
        if number:
            parts.append(_text(""))
        parts += _told(entry, entries, inner=entry in whole[:3])
    return _narrow(parts)


def _merged(found: Sequence[Entry]) -> list[Entry]:
    """The same option of several commands, or the same words of several fields, told once."""
    merged: dict[object, Entry] = {}
    for entry in found:
        alike = (entry.kind, entry.name, entry.says, str(entry.more))
        own = alike if entry.kind in ("option", "argument") else (*alike, entry.of)
        if own in merged:
            before = merged[own]
            entry = Entry(
                kind=entry.kind,
                name=entry.name,
                says=entry.says,
                of=f"{before.of}, {entry.of}",
                more=entry.more,
            )
        merged[own] = entry
    return [*merged.values()]


def _told(entry: Entry, entries: Sequence[Entry], inner: bool) -> list[RenderableType]:
    heading = _bold(entry.more.get("usage", entry.name))
    if label := _label(entry):
        heading.append(f"  {label}", style="not bold dim")
    lines: list[RenderableType] = [heading, _indented(_sentence(entry.says))]
    if entry.kind != "command" and (details := details_text(entry)):
        lines.append(_indented(details))
    if above := _above(entry, entries):
        lines.append(_indented(f"In {above.name}: {above.says}."))
    if inner and (below := parts_of(entry, entries)):
        rows = [(_short(entry, part), _summary(part)) for part in below]
        lines += [_text(""), _pairs(rows)]
    if entry.kind == "command":
        lines += _document(entry, entries)
    return lines


def _label(entry: Entry) -> str:
    if entry.kind == "section":
        return f"table of {entry.of}" if entry.of else "file of keys"
    return _LABELS[entry.kind].format(of=entry.of)


def _short(entry: Entry, part: Entry) -> str:
    if part.kind == "field":
        return part.name[len(entry.name) :].lstrip("[].")
    return " ".join([part.name, part.more.get("takes", "")]).rstrip()


def _summary(part: Entry) -> str:
    more = part.more
    aside = [f"unit: {more['unit']}"] if "unit" in more else []
    aside += [f"one of {more['one of']}"] if "one of" in more else []
    aside += [f"default: {more['default']}"] if "default" in more else []
    aside += ["required"] if more.get("required") == "yes" else []
    return part.says + (f" ({'; '.join(aside)})" if aside else "")


def details_text(entry: Entry) -> str:
    """Return type, unit, default and so on in one line."""
    said = []
    for label, value in entry.more.items():
        if label == "type":
            said.append(value)
        elif label == "required":
            said.append("required" if value == "yes" else f"required {value}")
        else:
            said.append(f"{label}: {value}")
    return "; ".join(said)


def _above(entry: Entry, entries: Sequence[Entry]) -> Entry | None:
    """The field that a field lies in, where that is told of."""
    if entry.kind != "field":
        return None
    outer = entry.name.rpartition(".")[0].removesuffix("[]")
    return next((e for e in entries if e.name == outer and e.of == entry.of), None)


def _document(entry: Entry, entries: Sequence[Entry]) -> list[RenderableType]:
    """The top of the JSON document of a command."""
    own = [e.name for e in entries if e.kind == "field" and entry.name in e.of.split(", ")]
    top = dict.fromkeys(name.split(".")[0].removesuffix("[]") for name in own)
    if not top:
        return []
    return [_text(""), _text(f"JSON fields (--json): {', '.join(top)}.")]


def _sentence(text: str) -> str:
    shown = text[:1].upper() + text[1:] if text[:2].islower() or text[:2] == "a " else text
    return shown if shown.endswith((".", "?")) else f"{shown}."


def _pairs(rows: Iterable[tuple[str, str]]) -> RenderableType:
    from rich.table import Table
    from rich.text import Text

    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), show_header=False)
    table.add_column(min_width=10, max_width=_NAMES, overflow="fold")
    table.add_column(overflow="fold")
    for name, says in rows:
        table.add_row(Text(name), Text(says))
    return table


def _text(text: str) -> RenderableType:
    from rich.text import Text

    return Text(text)


def _bold(text: str) -> Text:
    from rich.text import Text

    return Text(text, style="bold")


def _indented(text: str) -> RenderableType:
    from rich.padding import Padding
    from rich.text import Text

    return Padding(Text(text), (0, 0, 0, 2))


def _narrow(parts: Sequence[RenderableType]) -> RenderableType:
    from rich.console import Group
    from rich.constrain import Constrain

    return Constrain(Group(*parts), WIDTH)
