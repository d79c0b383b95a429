"""What a study asks for: the keys of study.toml that its numbers rest on, and how they differ.

Titles, labels, what new plans keep to and what the bench has are left out: they may change freely.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from muntin.record.definition import STUDY_FILE, Definition
from muntin.record.faults import quoted

Asked = Mapping[str, Any]
_FREE = {
    "factors": {"label", "per_plate", "plan_low", "plan_high", "plan_choices"},
    "responses": {"label"},
}


def asked_of(definition: Definition) -> dict[str, Any]:
    """Return what is asked as plain values: judgement, factors and responses by name, limits,
    shared errors, what is fixed. The stop rule has a record of its own (`stop_rule`).
    """
    plain = definition.model_dump(mode="json", exclude_none=True)
    asked: dict[str, Any] = {
        "required_probability": definition.required_probability,
        "judged_by": definition.judged_by,
        "plate": definition.plate,
    }
    for table, free in _FREE.items():
        asked[table] = {
            one["name"]: {key: _short(value) for key, value in one.items() if key not in free}
            for one in plain[table]
        }
    for one in asked["responses"].values():
        if "prior_table" in one:
            one["priors"] = one.pop("prior_table")
    asked["limits"] = [limit.allow for limit in definition.limits]
    asked["shared_errors"] = plain["shared_errors"]
    asked["fixed"] = dict(definition.fixed)
    return asked


def _short(value: Any) -> Any:
    """An amount as study.toml has it."""
    if isinstance(value, dict) and set(value) == {"value", "relative"}:
        return f"{100 * value['value']:.6g} %" if value["relative"] else value["value"]
    return value


def asked_changes(was: Asked, now: Asked) -> list[str]:
    """Return what is asked otherwise than before, one sentence each."""
    return [*_differences(was, now, ())]


def _differences(was: Any, now: Any, path: tuple[str, ...]) -> Iterator[str]:
    if isinstance(was, Mapping) and isinstance(now, Mapping):
        for name in dict.fromkeys([*was, *now]):
            yield from _differences(was.get(name), now.get(name), (*path, str(name)))
    elif was != now:
        where = ", ".join((STUDY_FILE, *path))
        yield f"{where}: {_shown(was)}, now {_shown(now)}"


def _shown(value: Any) -> str:
    if value is None or value in ({}, []):
        return "none"
    if isinstance(value, Mapping):
        return "(" + ", ".join(f"{name} {_shown(one)}" for name, one in value.items()) + ")"
    if isinstance(value, list):
        return ", ".join(_shown(one) for one in value)
    return quoted(value)
