"""Entries of the keys of study.toml, plate notes and edit records, from their declarations."""

from __future__ import annotations

import datetime
import types
import typing
from collections.abc import Iterator
from dataclasses import replace
from typing import Any, Literal

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from muntin.record.assay import FixedWell
from muntin.record.column_plan import ColumnPlan
from muntin.record.definition import Definition
from muntin.record.edits import EditRecord
from muntin.record.keys import Amount
from muntin.record.notes import PlateNotes
from muntin.record.template import toml_value
from muntin.reference.entry import Entry

NOTES = "plates/<plate>.toml"
RECORD = "plans/<plate>.edit.toml"
COLUMN_PLAN = "columns/<plan>.toml"
_WORDS: dict[Any, str] = {
    float: "number",
    int: "whole number",
    str: "text",
    bool: "true or false",
    datetime.date: "date",
    Amount: 'number, or a share such as "5 %"',
}
_SEVERAL = {"number": "numbers", "text": "texts", "whole number": "whole numbers"}
_SEVERAL |= {"list of numbers": "lists of numbers"}
_FEW = 2
_BOUNDS = {"gt": "above", "ge": "at least", "lt": "below", "le": "at most"}


def key_entries() -> Iterator[Entry]:
    """Yield the entries of all sections and their keys, in the order of the files."""
    for name, info in Definition.model_fields.items():
        yield from _section(name, info)
    yield Entry(kind="section", name=NOTES, says=f"{PlateNotes.__doc__}"[:-1].lower())
    yield from _keys(PlateNotes, NOTES)
    yield Entry(
        kind="section",
        name=RECORD,
        says="what was changed in a plan against the one offered; written by propose --keep",
    )
    yield from _keys(EditRecord, RECORD)
    yield Entry(
        kind="section",
        name=COLUMN_PLAN,
        says="what was predicted of column runs before they were made; written by confirm",
    )
    yield from _keys(ColumnPlan, COLUMN_PLAN)


def _section(path: str, info: FieldInfo) -> Iterator[Entry]:
    model, several = _model_of(info.annotation)
    heading = f"[[{path}]]" if several else f"[{path}]"
    yield Entry(kind="section", name=heading, says=info.description or "", of="study.toml")
    if model is None:  # free keys, of which some are known
        yield from map(_with_assay, _keys(FixedWell, heading))
    else:
        yield from _keys(model, heading, path)


def _with_assay(entry: Entry) -> Entry:
    required = {"required": "with [assay]"} if "required" in entry.more else {}
    return replace(entry, more=entry.more | required)


def _keys(model: type[BaseModel], heading: str, path: str = "") -> Iterator[Entry]:
    """The keys of a table, then the tables in it; without a path these are lists of keys."""
    inner = []
    for name, info in model.model_fields.items():
        shown = info.alias or name
        within, several = _model_of(info.annotation)
        if within is None or _is_value(within):
            yield _key(shown, info, heading)
        elif path:
            inner.append((f"{path}.{shown}", info))
            if not several:
                yield _key(shown, info, heading)
        else:
            yield _key(shown, info, heading)
            yield from _keys(within, f"{heading} [[{shown}]]")
    for place, info in inner:
        yield from _section(place, info)


def _is_value(model: type[BaseModel]) -> bool:
    return model is Amount or set(model.model_fields) == {"median", "log_sd"}


def _key(name: str, info: FieldInfo, heading: str) -> Entry:
    if not info.description:
        raise ValueError(f"{heading} {name} has no help")
    return Entry(kind="key", name=name, says=info.description, of=heading, more=_more(info))


def _more(info: FieldInfo) -> dict[str, str]:
    extra = info.json_schema_extra if isinstance(info.json_schema_extra, dict) else {}
    more = {"type": type_words(info.annotation)}
    if rules := rules_words(info):
        more["range"] = rules
    if extra.get("unit"):
        more["unit"] = str(extra["unit"])
    default = info.default
    if info.is_required():
        more["required"] = "yes"
    elif default is not None and default not in ("", (), {}) and not isinstance(default, BaseModel):
        more["default"] = toml_value(default)
    example = extra.get("example")
    if example not in (None, "") and toml_value(example) != more.get("default"):
        more["example"] = toml_value(example)
    return more


def rules_words(info: FieldInfo) -> str:
    """Return the bounds of a key in words: "above 0 and below 1"; "" without any."""
    said = []
    for rule in info.metadata:
        for bound, word in _BOUNDS.items():
            if (limit := getattr(rule, bound, None)) is not None:
                said.append(f"{word} {limit:g}")
    return " and ".join(said)


def type_words(annotation: Any) -> str:
    """Return what a key takes, in words."""
    origin, inner = typing.get_origin(annotation), typing.get_args(annotation)
    if annotation in _WORDS:
        return _WORDS[annotation]
    if origin is typing.Annotated:
        return type_words(inner[0])
    if origin is Literal:
        return "one of " + ", ".join(toml_value(value) for value in inner)
    if origin in (typing.Union, types.UnionType):
        said = [type_words(part) for part in inner if part is not type(None)]
        return " or ".join(dict.fromkeys(said))
    if origin is tuple:
        return _list_words(inner)
    if origin is dict:
        return f"table of names, a {type_words(inner[1])} each"
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        names = [*annotation.model_fields]
        return f"table of {' and '.join(names)}" if len(names) <= _FEW else "table"
    raise TypeError(f"no words for {annotation}")


def _list_words(inner: tuple[Any, ...]) -> str:
    one = inner[0]
    if isinstance(one, type) and issubclass(one, BaseModel):
        return "list of tables"
    several = _SEVERAL[type_words(one)]
    return f"list of {several}" if inner[-1] is Ellipsis else f"list of {len(inner)} {several}"


def _model_of(annotation: Any) -> tuple[type[BaseModel] | None, bool]:
    """The table that an annotation holds, None where it holds none, and whether several."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation, False
    several = typing.get_origin(annotation) is tuple
    for part in typing.get_args(annotation):
        model, more = _model_of(part)
        if model is not None:
            return model, several or more
    return None, False
