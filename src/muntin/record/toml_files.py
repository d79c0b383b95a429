"""TOML files read into tables of keys, with every fault named by table and key."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError

from muntin.record.faults import Fault, did_you_mean, number, quoted
from muntin.record.files import NotTextError, decoded
from muntin.record.keys import inner_model
from muntin.record.toml_slips import toml_content
from muntin.record.value_slips import iso_day

Model = TypeVar("Model", bound=BaseModel)
_PROBLEMS = {
    "float_type": "is not a number",
    "float_parsing": "is not a number",
    "finite_number": "is not a finite number",
    "int_type": "is not a whole number",
    "int_from_float": "is not a whole number",
    "string_type": "is not text; put it in quotes",
    "tuple_type": "is not a list",
    "dict_type": "is not a table",
    "model_type": "is not a table",
    "too_short": "has too few entries",
    "too_long": "has too many entries",
    "date_type": "is not a date such as 2026-05-04",
    "date_parsing": "is not a date such as 2026-05-04",
    "date_from_datetime_parsing": "is not a date such as 2026-05-04",
    "date_from_datetime_inexact": "is not a date such as 2026-05-04",
}
_BOUNDS = {
    "greater_than": ("must lie above", "gt"),
    "greater_than_equal": ("must be at least", "ge"),
    "less_than": ("must lie below", "lt"),
    "less_than_equal": ("must be at most", "le"),
}


def read_toml(
    path: Path, file: str, model: type[BaseModel], faults: list[Fault]
) -> dict[str, Any] | None:
    """Return the content of a TOML file that describes a `model`, or None; faults join `faults`.

    `file` is the path in messages. Content with faults is there to be judged, not used.
    """
    try:
        return toml_content(decoded(path.read_bytes()), model, file, faults)
    except NotTextError:
        faults.append(Fault(file=file, problem="is not a text file"))
    except OSError as error:
        faults.append(Fault(file=file, problem="cannot be read", hint=error.strerror or ""))
    except RecursionError:
        faults.append(Fault(file=file, problem="is nested too deeply"))
    return None


def parse(model: type[Model], data: dict[str, Any], file: str, faults: list[Fault]) -> Model | None:
    """Return the record that `data` describes; every fault of its keys joins `faults`.

    Unknown keys are left out after they are named, so that the rest can still be judged. None
    where a known key is missing or holds something else than it may.
    """
    known = _known_keys(model, data, (), file, faults, [*model.model_fields])
    try:
        return model.model_validate(known)
    except ValidationError as error:
        faults.extend(_fault(file, model, known, detail) for detail in error.errors())
    return None


def _known_keys(
    model: type[BaseModel],
    data: dict[str, Any],
    at: tuple[str, ...],
    file: str,
    faults: list[Fault],
    top: Sequence[str],
) -> dict[str, Any]:
    fields = {info.alias or name: info.annotation for name, info in model.model_fields.items()}
    kept = {}
    for name, value in data.items():
        if name not in fields:
            faults.append(
                Fault(
                    file=file,
                    where=", ".join(at),
                    value=quoted(name),
                    problem="is not a key" + (f" of {_heading(at)}" if at else ""),
                    hint=_meant(name, [*fields], top, at),
                )
            )
            continue
        inner = inner_model(fields[name])
        if inner is not None and isinstance(value, dict):
            value = _known_keys(inner, value, (*at, name), file, faults, top)
        elif inner is not None and isinstance(value, list):
            value = [
                _known_keys(inner, item, (*at, _item(name, index, item)), file, faults, top)
                if isinstance(item, dict)
                else item
                for index, item in enumerate(value)
            ]
        kept[name] = value
    return kept


def _meant(name: str, fields: Sequence[str], top: Sequence[str], at: Sequence[str]) -> str:
    if name in top and name not in fields:
        return "it is no part of a table: write it above the first [table]"
    close = did_you_mean(name, fields)
    asked = close.startswith("did you mean") and at[-1:] == ("priors",)
    return f"{close} known: {', '.join(fields)}" if asked else close


def _item(table: str, index: int, item: object) -> str:
    name = item.get("name") if isinstance(item, Mapping) else None
    return f"{table}, {name}" if isinstance(name, str) and name.strip() else f"{table} {index + 1}"


def _heading(at: tuple[str, ...]) -> str:
    """Return the table's heading as it is written: [[factors]], [study], [responses.priors]."""
    first = re.split(r"[ ,]", at[0])[0]
    heading = ".".join([first, *at[1:]])
    return f"[[{heading}]]" if first != at[0] and len(at) == 1 else f"[{heading}]"


def _places(loc: tuple[int | str, ...], data: Any) -> Iterator[str]:
    steps = [*loc]
    while steps:
        name = steps.pop(0)
        data = data.get(name) if isinstance(data, dict) else None
        if steps and isinstance(steps[0], int) and isinstance(data, list):
            index = steps.pop(0)
            data = data[int(index)]
            yield _item(str(name), int(index), data)
        else:
            yield str(name)


def _fault(file: str, model: type[BaseModel], data: dict[str, Any], detail: Any) -> Fault:
    *table, last = _places(detail["loc"], data)
    if detail["type"] == "missing":
        where = ", ".join(table)
        if not table:
            return Fault(file=file, problem=f"table [{last}] is missing")
        says = _description(model, detail["loc"])
        return Fault(file=file, where=where, value=quoted(last), problem="is missing", hint=says)
    problem, allowed = _said(detail)
    if detail["type"] == "tuple_type" and isinstance(detail["input"], dict):
        problem = f"must be one or more tables, each headed [[{last}]]"
    shown = quoted(detail["input"]) if isinstance(detail["input"], str | int | float) else ""
    day = iso_day(shown.strip('"')) if detail["type"].startswith("date_") else None
    return Fault(
        file=file,
        where=", ".join([*table, last]),
        value=shown,
        problem=problem,
        allowed=allowed,
        hint=f"write {day}" if day else "",
    )


def _said(detail: Any) -> tuple[str, str]:
    kind, context = detail["type"], detail.get("ctx", {})
    if kind == "value_error":
        return str(context["error"]), ""
    if kind == "literal_error":
        return "is not", str(context["expected"]).replace("'", '"')
    if kind in _BOUNDS:
        problem, bound = _BOUNDS[kind]
        return problem, number(float(context[bound]))
    return _PROBLEMS.get(kind, str(detail["msg"])), ""


def _description(model: type[BaseModel], loc: tuple[int | str, ...]) -> str:
    current: type[BaseModel] | None = model
    says = ""
    for name in loc:
        if isinstance(name, str) and current is not None and name in current.model_fields:
            info = current.model_fields[name]
            says, current = info.description or "", inner_model(info.annotation)
    return says
