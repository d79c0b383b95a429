"""A new study: a study.toml commented from the keys' own declarations, and an empty plate table."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from muntin.record.assay import Assay, AssayStage, FixedWell
from muntin.record.bench import Bench, BenchStock
from muntin.record.buffers import Buffer
from muntin.record.columns import Columns
from muntin.record.definition import (
    MOST,
    STUDY_FILE,
    Definition,
    PlanRules,
    SharedError,
    StopRule,
    StudyTable,
)
from muntin.record.factors import Factor
from muntin.record.faults import Fault, StudyFaults
from muntin.record.files import write_atomic
from muntin.record.limits import Forbidden, Limit
from muntin.record.protein import Protein
from muntin.record.responses import Response
from muntin.record.tables import SUFFIXES
from muntin.record.uptake_keys import UptakeKeys

_APART = "stages"
_STUDY = {"title": "Invented example: elution of a protein from a resin", "plate": 96}
_STUDY |= {"required_probability": 0.90}
_FACTORS: tuple[dict[str, Any], ...] = (
    {"name": "elution_ph", "label": "Elution pH", "low": 4.5, "high": 7.5, "step": 0.1},
    {"name": "salt", "label": "Salt", "unit": "mM", "low": 0, "high": 500, "step": 10},
    {"name": "load", "label": "Load", "unit": "mg/mL resin", "low": 5, "high": 40, "step": 1},
    {"name": "wash_salt", "label": "Wash salt", "unit": "mM", "low": 0, "high": 100, "step": 5},
    {"name": "contact", "label": "Contact time", "unit": "min", "low": 5, "high": 60, "step": 5},
    {"name": "additive", "label": "Additive", "unit": "mM", "low": 0, "high": 300, "step": 25},
)
_RESPONSE = {"name": "recovery", "label": "Recovery", "kind": "fraction", "at_least": 0.80}
_HEAD = """\
# A muntin study. The process below is INVENTED: put your own in its place.
# Every key is shown, with its help above it. Lines such as #unit = "" are optional keys and
# tables; take the # away to use them.
# `muntin check` names whatever it cannot read.
"""


def new_study(folder: str | Path, factors: int = 2) -> tuple[Path, Path]:
    """Write a commented study.toml and an empty plate table; return both paths.

    `factors` counts the factors of the invented example, 1 to 6. Raises StudyFaults where the
    folder already holds a study or plates, or cannot be written.
    """
    folder = Path(folder)
    _refuse(folder, factors)
    names = [factor["name"] for factor in _FACTORS[:factors]]
    heading = ["well", "role", *names, _RESPONSE["name"], "exclude"]
    plate = folder / "plates" / "plate-01.csv"
    write_atomic(plate, ",".join(map(str, heading)) + "\n")
    write_atomic(folder / STUDY_FILE, study_text(factors))
    return folder / STUDY_FILE, plate


def _refuse(folder: Path, factors: int) -> None:
    faults = []
    if not 1 <= factors <= MOST:
        problem = "factors were asked for; a study has"
        allowed = f"1 to {MOST}"
        faults.append(Fault(file=str(folder), value=str(factors), problem=problem, allowed=allowed))
    if folder.exists() and not folder.is_dir():
        faults.append(Fault(file=str(folder), problem="is a file, not a folder"))
    plates = folder / "plates"
    taken = [folder / STUDY_FILE] if (folder / STUDY_FILE).exists() else []
    if plates.is_dir():
        taken += [path for path in sorted(plates.iterdir()) if path.suffix.lower() in SUFFIXES]
    for path in taken:
        problem = "is already there and is not overwritten"
        faults.append(Fault(file=str(path), problem=problem, hint="name another folder"))
    if faults:
        raise StudyFaults(faults)


def study_text(factors: int = 2) -> str:
    """Return the commented study.toml of the invented example."""
    parts = [
        _HEAD,
        _table("[study]", "study", StudyTable, _STUDY),
        _table("[[factors]]", "factors", Factor, _FACTORS[0]),
        *(_bare("[[factors]]", given) for given in _FACTORS[1:factors]),
        _table("[[responses]]", "responses", Response, _RESPONSE),
        _table("[[limits]]", "limits", Limit),
        _table("[[forbidden]]", "forbidden", Forbidden),
        _table("[[shared_errors]]", "shared_errors", SharedError),
        _table("[protein]", "protein", Protein),
        _table("[columns]", "columns", Columns),
        _table("[plan]", "plan", PlanRules),
        _table("[stop]", "stop", StopRule),
        _table("[uptake]", "uptake", UptakeKeys),
        _table("[bench]", "bench", Bench),
        _table("[[bench.stocks]]", "stocks", BenchStock),
        _table("[[bench.buffers]]", "buffers", Buffer),
        _table("[fixed]", "fixed", FixedWell),
        _table("[assay]", "assay", Assay),
        _stages(),
    ]
    return "\n".join(parts)


def _says(section: str) -> str:
    fields = {**Bench.model_fields, **Definition.model_fields}
    return fields[section].description or ""


def _table(
    heading: str, section: str, model: type[BaseModel], given: Mapping[str, Any] | None = None
) -> str:
    """Return a table with all keys of its declaration; without `given`, all behind a #."""
    text = _comment(_says(section)) + ("" if given else "#") + heading + "\n"
    for name, info in model.model_fields.items():
        if name == _APART or info.default == ():  # tables of their own
            continue
        mark = "" if given and name in given else "#"
        value = given[name] if given and name in given else _example(info)
        text += _comment(_help(info)) + f"{mark}{info.alias or name} = {toml_value(value)}\n"
    return text


def _stages() -> str:
    """Return the stages of [assay]: a load with all keys and an elution, all behind a #."""
    text = _comment(Assay.model_fields[_APART].description or "") + "#[[assay.stages]]\n"
    for name, info in AssayStage.model_fields.items():
        text += _comment(_help(info)) + f"#{name} = {toml_value(_example(info))}\n"
    elution = {"fraction": "e1", "stage": "elution", "volume_ul": 200.0}
    return text + "\n" + re.sub("(?m)^", "#", _bare("[[assay.stages]]", elution).strip()) + "\n"


def _example(info: FieldInfo) -> Any:
    """What stands behind a key: its example, else its default."""
    extra = info.json_schema_extra if isinstance(info.json_schema_extra, dict) else {}
    example = extra.get("example")
    return info.default if example is None else example


def _bare(heading: str, given: Mapping[str, Any]) -> str:
    lines = [f"{name} = {toml_value(value)}" for name, value in given.items()]
    return "\n".join([heading, *lines]) + "\n"


def _help(info: FieldInfo) -> str:
    extra = info.json_schema_extra if isinstance(info.json_schema_extra, dict) else {}
    unit = f"unit: {extra['unit']}" if extra.get("unit") else ""
    plain = info.default is not None and not info.is_required() and info.default not in ("", {})
    default = f"default: {toml_value(info.default)}" if plain else ""
    more = "; ".join(part for part in (unit, default) if part)
    return (info.description or "") + (f" ({more})" if more else "")


def _comment(text: str) -> str:
    """Return the text as comment lines of at most 96 signs."""
    lines, line = [], "#"
    for word in text.split():
        if len(line) + 1 + len(word) > 96:
            lines.append(line)
            line = "#"
        line += f" {word}"
    return "\n".join([*lines, line]) + "\n"


def toml_value(value: Any) -> str:
    """Return a value as TOML writes it: text, number, truth, list or inline table."""
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{name} = {toml_value(v)}" for name, v in value.items()) + " }"
    if isinstance(value, list | tuple):
        return "[" + ", ".join(toml_value(item) for item in value) + "]"
    return json.dumps(value, ensure_ascii=False)
