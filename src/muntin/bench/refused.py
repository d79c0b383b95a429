"""Conditions that cannot be mixed, as faults of the plan: each with the nearest that can, many of
one cause as one.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from muntin.bench.mixing import Mixer
from muntin.bench.nearby import nearest_that
from muntin.bench.recipe import Refusal
from muntin.record.bottles import Value
from muntin.record.faults import Fault, listed, number

_MANY = 4


@dataclass(frozen=True, kw_only=True, eq=False)
class Refused:
    """A condition (raw units) that cannot be mixed, why, and the wells that ask for it."""

    condition: Mapping[str, Value]
    why: Refusal
    wells: Sequence[str]


def faults_of(mixer: Mixer, refused: Sequence[Refused], file: str) -> list[Fault]:
    """Return a fault of each condition, or one of four and more that have one cause."""
    by_cause: dict[str, list[Refused]] = {}
    for one in refused:
        by_cause.setdefault(one.why.cause, []).append(one)
    faults: list[Fault] = []
    for cause, alike in by_cause.items():
        if cause and len(alike) >= _MANY:
            faults.append(_of_many(mixer, alike, cause, file))
        else:
            faults += [_of_one(mixer, one, file) for one in alike]
    return faults


def _of_one(mixer: Mixer, one: Refused, file: str) -> Fault:
    return Fault(
        file=file,
        where=_wells(one.wells),
        value=_shown(mixer, one.condition),
        problem=one.why.reason,
        hint=_nearest(mixer, one.condition),
    )


def _of_many(mixer: Mixer, alike: Sequence[Refused], cause: str, file: str) -> Fault:
    """The fault of what is wrong with the stocks rather than with one condition."""
    strengths = [one.why.salt_stock_mm for one in alike if one.why.salt_stock_mm is not None]
    first = alike[0]
    hint = f"such as {_shown(mixer, first.condition)}; {_nearest(mixer, first.condition)}"
    if strengths:
        enough = number(max(strengths))
        hint = f"study.toml, bench, salt_stock_mm: {enough} and more would do for all of them"
    return Fault(
        file=file,
        where=_wells([well for one in alike for well in one.wells]),
        value=f"{len(alike)} conditions",
        problem=f"cannot be made: {cause}",
        hint=hint,
    )


def _nearest(mixer: Mixer, condition: Mapping[str, Value]) -> str:
    definition = mixer.definition
    whole = {name: value for name, value in condition.items() if value != ""}
    if len(whole) < len(definition.factors):
        return "study.toml, bench, control_condition"
    bottled = definition.bench.matched(definition.factors)
    close = nearest_that(mixer.works, definition, whole, definition.bench.held, bottled)
    if close is None:
        return "no condition near it works"
    return f"nearest that works: {_shown(mixer, close)}"


def _shown(mixer: Mixer, condition: Mapping[str, Value]) -> str:
    named = [f for f in mixer.definition.factors if condition.get(f.name, "") != ""]
    return ", ".join(f"{f.name} {f.shown(condition[f.name])}" for f in named)


def _wells(wells: Sequence[str]) -> str:
    return f"well{'s' if len(wells) > 1 else ''} {listed(wells)}"
