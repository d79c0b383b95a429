"""Slips in a TOML file: each named with its line, and read as it was meant."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from typing import Any, NamedTuple

from pydantic import BaseModel, ValidationError

from muntin.record.faults import Fault
from muntin.record.keys import inner_model, is_list
from muntin.record.value_slips import Wanted, mended, readable

_PLACE = re.compile(r" \(at (?:line (\d+), column \d+|(end of document))\)$")
_HEADING = re.compile(r"\s*(\[{0,2}\s*([A-Za-z_][\w.]*)\s*(\]{0,2}))\s*(?:#.*)?")
_PAIR = re.compile(r"\s*([A-Za-z_]\w*)\s*=\s*(.*?)\s*")
_COMMENT = re.compile(r"\s+#.*")
_ODD_BLANK = re.compile("[\u00a0\u2007\u202f\u200b]")
_OF_SHARES = re.compile(r"\s*kind\s*=\s*\"?fraction\b")
_IN_PER_CENT = re.compile(r"\s*unit\s*=\s*\"%\"")


class _Slip(NamedTuple):
    """Lines with a slip: the index of the first, the fault (None: found when the key is read), the
    line that was meant (None: it cannot be told), and how many lines it stands for.
    """

    row: int
    fault: Fault | None
    line: str | None
    lines: int = 1


class _Text(NamedTuple):
    """The lines of a file, what it describes, and its path in messages."""

    lines: list[str]
    model: type[BaseModel]
    file: str

    def fault(self, row: int, name: str, value: str, problem: str, allowed: str = "") -> Fault:
        shown = value if len(value) <= 60 else f"{value[:57]}..."
        where = f"line {row + 1}" + (f", {name}" if name else "")
        return Fault(file=self.file, where=where, value=shown, problem=problem, allowed=allowed)

    def table(self, row: int) -> str:
        """Return the name of the table that a line belongs to, "" above the first heading."""
        headings = (_headed(line) for line in reversed(self.lines[:row]))
        return next((found for found in headings if found), "")

    def block(self, row: int) -> list[str]:
        """Return the lines of the table that a line belongs to."""
        starts = [at for at, line in enumerate(self.lines) if _headed(line)]
        first = max((at for at in starts if at <= row), default=0)
        last = min((at for at in starts if at > row), default=len(self.lines))
        return self.lines[first:last]

    def owner(self, row: int) -> type[BaseModel] | None:
        """Return the table of keys that a line belongs to; None where any key may stand."""
        owner: type[BaseModel] | None = self.model
        for step in filter(None, self.table(row).split(".")):
            fields = {} if owner is None else owner.model_fields
            known = {info.alias or name: info.annotation for name, info in fields.items()}
            owner = inner_model(known.get(step))
        return owner

    def wanted(self, row: int, name: str) -> Wanted:
        """Return what the key of a line takes."""
        owner, block = self.owner(row), self.block(row)
        of_shares = any(_OF_SHARES.match(line) for line in block)
        share = of_shares and not any(_IN_PER_CENT.match(line) for line in block)
        return Wanted(lambda value: owner is None or _takes(owner, name, value), share)


def toml_content(
    text: str, model: type[BaseModel], file: str, faults: list[Fault]
) -> dict[str, Any] | None:
    """Return the content of a TOML file that describes a `model`, its slips read as meant.

    Each slip is a fault, so that nothing is used, but all else can still be judged. None where
    something is left that is not TOML. Raises RecursionError where it is nested too deeply.
    """
    given = _Text(
        text.replace("\r\n", "\n").replace("\r", "\n").rstrip("\n").split("\n"), model, file
    )
    touched: set[int] = set()
    while True:
        try:
            data = tomllib.loads("\n".join(given.lines) + "\n")
        except tomllib.TOMLDecodeError as error:
            slips = list(_line_slips(given, str(error)))
            if not slips or any(slip.row in touched for slip in slips):
                faults.append(_plain_fault(str(error), file))
                return None
        else:
            wrong = (name for name in model.model_fields if _misheaded(model, name, data))
            slips = [slip for name in wrong for slip in _heading_slips(given, name)]
            if not slips:
                return data
        faults.extend(slip.fault for slip in slips if slip.fault)
        for slip in slips:
            if slip.line is None:
                return None
            given.lines[slip.row : slip.row + slip.lines] = [slip.line, *[""] * (slip.lines - 1)]
            touched.add(slip.row)


def _plain_fault(said: str, file: str) -> Fault:
    place = _PLACE.search(said)
    where = "" if place is None else f"line {place[1]}" if place[1] else "last line"
    said = _PLACE.sub("", said)
    return Fault(file=file, where=where, problem=f"is not valid TOML: {said[:1].lower()}{said[1:]}")


def _line_slips(given: _Text, said: str) -> Iterator[_Slip]:
    """Yield the slips behind what the parser said, most often one in the line that it names."""
    place = _PLACE.search(said)
    if place is None:
        return
    row = int(place[1]) - 1 if place[1] else len(given.lines) - 1
    line = given.lines[row]
    pair = _PAIR.fullmatch(line)
    if _ODD_BLANK.search(line):
        plain = _ODD_BLANK.sub(" ", line)
        problem = "has a blank of another kind, as word processors make; type it anew:"
        yield _Slip(row, given.fault(row, "", line.strip(), problem, plain.strip()), plain)
    elif headings := [*_broken_headings(given, row)]:
        yield from headings
    elif said.startswith("Cannot"):
        yield _Slip(row, _twice(given, row), None)
    elif values := [*_open_value(given, row)]:
        yield from values
    elif pair and not pair[2]:
        problem = "has no value; give one, or write # before the key"
        yield _Slip(row, given.fault(row, pair[1], "", problem), "")
    elif not (pair and place[1] and readable(pair[2])):
        yield from _loose_pair(given, row)


def _headed(line: str) -> str:
    """Return the name of the table that a line is the heading of, "" where it is none."""
    found = _HEADING.fullmatch(line)
    return found[2] if found and ("[" in found[1] or found[3]) else ""


def _broken_headings(given: _Text, row: int) -> Iterator[_Slip]:
    if name := _headed(given.lines[row]):
        yield from _heading_slips(given, name)


def _misheaded(model: type[BaseModel], name: str, data: dict[str, Any]) -> bool:
    """Whether a table was given where a list of tables is wanted, or the other way round."""
    annotation = model.model_fields[name].annotation
    if inner_model(annotation) is None or name not in data:
        return False
    given = data[name]
    tables = isinstance(given, list) and any(isinstance(item, dict) for item in given)
    return isinstance(given, dict) if is_list(annotation) else tables


def _heading_slips(given: _Text, name: str) -> Iterator[_Slip]:
    """Yield all headings of one table of the model that have other brackets than they must."""
    info = given.model.model_fields.get(name)
    if info is None:
        return
    many = is_list(info.annotation)
    right = f"[[{name}]]" if many else f"[{name}]"
    for row, line in enumerate(given.lines):
        found = _HEADING.fullmatch(line)
        if found and _headed(line) == name and "".join(found[1].split()) != right:
            problem = f"needs {'double' if many else 'single'} brackets:"
            yield _Slip(row, given.fault(row, "", found[1], problem, right), right)


def _twice(given: _Text, row: int) -> Fault:
    line = given.lines[row]
    if name := _headed(line):
        return given.fault(row, "", line.strip(), "is there twice; keep one")
    table, name = given.table(row), line.partition("=")[0].strip()
    info = given.model.model_fields.get(table)
    several = info is not None and is_list(info.annotation)
    mend = f"each of the {table} has its own [[{table}]] above it" if several else "keep one"
    return given.fault(row, "", f'"{name}"', f"is there twice in one table; {mend}")


def _open_value(given: _Text, row: int) -> Iterator[_Slip]:
    """Yield the slip of the first value up to a line that TOML does not read, lists joined."""
    for at, line in enumerate(given.lines[: row + 1]):
        pair = _PAIR.fullmatch(line)
        if pair is None or pair[2][:1] in ("", "=", ":"):
            continue
        value, count = _joined(given.lines, at, pair[2])
        if readable(value):
            continue
        if slip := mended(value, given.wanted(at, pair[1])):
            fault = given.fault(at, pair[1], value, slip.problem, slip.value)
            meant = f"{pair[1]} = {slip.value}" if slip.value else None
            yield _Slip(at, fault if slip.problem else None, meant, count)
        return


def _joined(lines: list[str], row: int, value: str) -> tuple[str, int]:
    """Return a value without its comment, a list over several lines as one, and how many lines."""
    parts = [_uncommented(value)]
    if value.startswith("["):
        for line in lines[row + 1 :]:
            if "]" in parts[-1] or _headed(line) or _PAIR.fullmatch(line):
                break
            parts.append(_uncommented(line))
    return " ".join(part for part in parts if part), len(parts)


def _uncommented(value: str) -> str:
    if readable(value):
        return value
    bare = _COMMENT.sub("", f" {value}").strip()
    return bare if readable(bare) or not any(sign in value for sign in "\"'") else value.strip()


def _loose_pair(given: _Text, row: int) -> Iterator[_Slip]:
    """Yield the slip of a line that is meant as a key and its value, or as a note."""
    line, owner = given.lines[row].strip(), given.owner(row)
    found = _loose(line, owner)
    if found is None:
        problem = "is neither a key = value nor a [table]; a note begins with #"
        yield _Slip(row, given.fault(row, "", f'"{line}"', problem), "")
        return
    name, value = found
    slip = None if readable(value) else mended(value, given.wanted(row, name))
    if readable(value) or (slip and slip.value):
        meant = f"{name} = {slip.value if slip else value}"
        yield _Slip(row, given.fault(row, "", line, "must be written", meant), meant)


def _loose(line: str, owner: type[BaseModel] | None) -> tuple[str, str] | None:
    """Return the known key and the value that stand in a line, whatever is between them."""
    for pattern in (r"\s*[:=<>≤≥]+\s*", r"\s+"):
        name, *rest = re.split(pattern, line, maxsplit=1)
        name = re.sub(r"[ -]+", "_", name)
        if rest and rest[0] and owner is not None and name in owner.model_fields:
            return name, _uncommented(rest[0])
    return None


def _takes(model: type[BaseModel], name: str, value: Any) -> bool:
    """Whether a key takes a value."""
    try:
        model.model_validate({name: value})
    except ValidationError as error:
        return not any(detail["loc"][:1] == (name,) for detail in error.errors())
    return True
