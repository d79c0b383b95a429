"""Why each well is in the plan, in one sentence."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence

from muntin.design.selection import Pick, Selection
from muntin.record.definition import Definition

_ON_EDGE = 0.35


def reasons(
    definition: Definition, selection: Selection, p_mean: Sequence[float], opening: bool
) -> list[str]:
    """One sentence for each pick; p_mean is each pick's probability that the mean passes."""
    run = {r.values: r.wells for r in selection.run}
    seen: Counter[int] = Counter()
    said = []
    for pick, p in zip(selection.picks, p_mean, strict=True):
        values = dict(selection.candidates.iloc[pick.candidate])
        wells = run.get(tuple(values.values()), ())
        said.append(_reason(definition, pick, values, p, wells, seen[pick.candidate], opening))
        seen[pick.candidate] += 1
    return said


def _reason(
    definition: Definition,
    pick: Pick,
    values: Mapping[object, object],
    p: float,
    wells: tuple[tuple[str, str], ...],
    before: int,
    opening: bool,
) -> str:
    if pick.role == "bridge":
        return f"repeat of {_place(wells)}, a known {pick.purpose}, ties the plates together"
    if opening and not before:
        return "opening plate: spread over the range to find where the target is met"
    if before:
        return f"well {before + 1} of this condition, to average the noise ({_chance(p)})"
    again = f"repeat of {_place(wells)}: " if wells else ""
    if pick.purpose == "best":
        return f"{again}may beat the best condition so far ({_chance(p)})"
    where = f"{definition.factors[0].label} {_value(values[definition.factors[0].name])}"
    if abs(p - 0.5) <= _ON_EDGE:
        return f"{again}{_chance(p)}, on the edge at {where}"
    side = "pass" if p > 0.5 else "fail"
    return f"{again}{_chance(p)}, makes sure of the {side} side at {where}"


def _chance(p: float) -> str:
    return f"probability {p:.2f}"


def _place(wells: tuple[tuple[str, str], ...]) -> str:
    plate, well = wells[-1]
    return f"{plate} {well}"


def _value(value: object) -> str:
    return f"{value:g}" if isinstance(value, float | int) else str(value)
