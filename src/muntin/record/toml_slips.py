"""Slips in a TOML file: each named with its line, and read as it was meant."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from typing import Any, NamedTuple

from pydantic import BaseModel, ValidationError

from muntin.record.faults import Fault
from muntin.record.keys import inner_model, is_list
from muntin.record.value_slips import mended, readable

_PLACE = re.compile(r" \(at (?:line (\d+), column \d+|(end of document))\)$")
_HEADING = re.compile(r"\s*(\[{1,2}\s*([A-Za-z_][\w.]*)\s*\]{0,2})\s*(?:#.*)?")
_PAIR = re.compile(r"\s*([A-Za-z_]\w*)\s*=\s*(.*?)\s*")
_NO_EQUALS = re.compile(r"\s*([A-Za-z_]\w*)\s*[:\s]\s*([^=\s].*?)\s*")


class _Slip(NamedTuple):
    """A line with a slip: its index, its fault (None: found when the key is read), the line as it
    was meant (None: it cannot be told).
    """

    row: int
    fault: Fault | None
    line: str | None


def toml_content(
    text: str, model: type[BaseModel], file: str, faults: list[Fault]
) -> dict[str, Any] | None:
    """Return the content of a TOML file that describes a `model`, its slips read as meant.

    Each slip is a fault, so that nothing is used, but all else can still be judged. None where
    something is left that is not TOML. Raises RecursionError where it is nested too deeply.
    """
    lines = text.replace("\r\n", "\n").rstrip("\n").split("\n")
    touched: set[int] = set()
    while True:
        try:
            data = tomllib.loads("\n".join(lines) + "\n")
        except tomllib.TOMLDecodeError as error:
            slips = list(_line_slips(lines, str(error), model, file))
            if not slips or any(slip.row in touched for slip in slips):
                faults.append(_plain_fault(str(error), file))
                return None
        else:
            wrong = (name for name in model.model_fields if _misheaded(model, name, data))
            slips = [slip for name in wrong for slip in _heading_slips(lines, name, model, file)]
            if not slips:
                return data
        for slip in slips:
            faults.extend([slip.fault] if slip.fault else [])
            if slip.line is None:
                return None
            lines[slip.row] = slip.line
            touched.add(slip.row)


def _plain_fault(said: str, file: str) -> Fault:
    place = _PLACE.search(said)
    where = "" if place is None else f"line {place[1]}" if place[1] else "last line"
    said = _PLACE.sub("", said)
    return Fault(file=file, where=where, problem=f"is not valid TOML: {said[:1].lower()}{said[1:]}")


def _line_slips(lines: list[str], said: str, model: type[BaseModel], file: str) -> Iterator[_Slip]:
    """Yield the slips behind what the parser said, most often one in the line that it names."""
    place = _PLACE.search(said)
    if place is None or not place[1]:
        return
    row = int(place[1]) - 1
    heading, pair = _HEADING.fullmatch(lines[row]), _PAIR.fullmatch(lines[row])
    if heading:
        yield from _heading_slips(lines, heading[2], model, file)
    elif pair and said.startswith("Cannot overwrite"):
        yield _Slip(row, _twice(lines, row, pair[1], model, file), None)
    elif pair:
        yield from _value_slip(lines, row, pair[1], pair[2], model, file)
    elif bare := _NO_EQUALS.fullmatch(lines[row]):
        yield from _missing_equals(lines, row, bare[1], bare[2], model, file)


def _misheaded(model: type[BaseModel], name: str, data: dict[str, Any]) -> bool:
    """Whether a table was given where a list of tables is wanted, or the other way round."""
    annotation = model.model_fields[name].annotation
    if inner_model(annotation) is None or name not in data:
        return False
    given = data[name]
    tables = isinstance(given, list) and any(isinstance(item, dict) for item in given)
    return isinstance(given, dict) if is_list(annotation) else tables


def _heading_slips(
    lines: list[str], name: str, model: type[BaseModel], file: str
) -> Iterator[_Slip]:
    """Yield all headings of one table of the model that have other brackets than they must."""
    info = model.model_fields.get(name)
    if info is None:
        return
    many = is_list(info.annotation)
    right = f"[[{name}]]" if many else f"[{name}]"
    for row, line in enumerate(lines):
        found = _HEADING.fullmatch(line)
        if found and found[2] == name and "".join(found[1].split()) != right:
            problem = f"needs {'double' if many else 'single'} brackets:"
            where = f"line {row + 1}"
            fault = Fault(file=file, where=where, value=found[1], problem=problem, allowed=right)
            yield _Slip(row, fault, right)


def _twice(lines: list[str], row: int, name: str, model: type[BaseModel], file: str) -> Fault:
    table = _table(lines, row)
    info = model.model_fields.get(table)
    several = info is not None and is_list(info.annotation)
    return Fault(
        file=file,
        where=f"line {row + 1}",
        value=f'"{name}"',
        problem="is there twice in one table",
        hint=f"each of the {table} has its own [[{table}]] above it" if several else "keep one",
    )


def _value_slip(
    lines: list[str], row: int, name: str, value: str, model: type[BaseModel], file: str
) -> Iterator[_Slip]:
    if not any(sign in value for sign in "\"'"):
        value = re.sub(r"\s*#.*", "", value)
    where = f"line {row + 1}, {name}"
    if not value:
        problem = "has no value; give one, or write # before the key"
        yield _Slip(row, Fault(file=file, where=where, problem=problem), "")
        return
    owner = _owner(lines, row, model)
    slip = mended(value, lambda text: owner is None or _takes(owner, name, text))
    if slip is None:
        return
    shown = value if len(value) <= 60 else f"{value[:57]}..."
    fault = Fault(file=file, where=where, value=shown, problem=slip.problem, allowed=slip.value)
    line = f"{name} = {slip.value}" if slip.value else None
    yield _Slip(row, fault if slip.problem else None, line)


def _missing_equals(
    lines: list[str], row: int, name: str, value: str, model: type[BaseModel], file: str
) -> Iterator[_Slip]:
    owner = _owner(lines, row, model)
    if readable(value) and owner is not None and name in owner.model_fields:
        line = f"{name} = {value}"
        fault = Fault(
            file=file,
            where=f"line {row + 1}",
            value=f'"{name}"',
            problem="needs a = before its value:",
            allowed=line,
        )
        yield _Slip(row, fault, line)


def _table(lines: list[str], row: int) -> str:
    """Return the name of the table that a line belongs to, "" above the first heading."""
    headings = (_HEADING.fullmatch(line) for line in reversed(lines[:row]))
    return next((found[2] for found in headings if found), "")


def _owner(lines: list[str], row: int, model: type[BaseModel]) -> type[BaseModel] | None:
    """Return the table of keys that a line belongs to; None where any key may stand."""
    owner: type[BaseModel] | None = model
    for step in filter(None, _table(lines, row).split(".")):
        fields = {} if owner is None else owner.model_fields
        known = {info.alias or name: info.annotation for name, info in fields.items()}
        owner = inner_model(known.get(step))
    return owner


def _takes(model: type[BaseModel], name: str, text: str) -> bool:
    """Whether a key takes a text."""
    try:
        model.model_validate({name: text})
    except ValidationError as error:
        return not any(detail["loc"][:1] == (name,) for detail in error.errors())
    return True
