"""How many column runs the reserved protein reaches for."""

from __future__ import annotations

from collections.abc import Sequence

from muntin.confirmation.places import Spot
from muntin.record.definition import Definition
from muntin.record.faults import Fault, StudyFaults, counted, number

_RUNS = 3
_SLACK = 1e-9


def run_mg(definition: Definition, spot: Spot) -> float | None:
    """Return the protein that a run at a condition takes in mg; None without [columns]."""
    if definition.columns is None:
        return None
    factor = None if definition.protein is None else definition.protein.load_factor
    load = None if factor is None else float(spot.condition[factor])
    return definition.columns.run_mg(load)


def within_reserve(
    definition: Definition, spots: Sequence[Spot], used_mg: float
) -> tuple[list[Spot], list[str]]:
    """Return the runs that are offered, spots in turn as often as asked, and notices.

    used_mg: what earlier column runs took of the reserve. Runs that it does not reach for are left
    out. Raises StudyFaults where it reaches for none.
    """
    wanted = _RUNS if definition.columns is None else definition.columns.runs
    turns = [spots[i % len(spots)] for i in range(wanted)]
    notices = [] if len(spots) == _RUNS else ["The window has too few conditions for two edges."]
    if definition.columns is None or definition.protein is None:
        table = "[columns]" if definition.columns is None else "[protein]"
        notices.append(
            f"Whether the protein reaches is not known: study.toml had no {table} when the runs "
            "were planned; once it has, muntin confirm --again plans them anew."
        )
        return turns, notices
    reserve = definition.protein.reserved_mg
    left, offered = reserve - used_mg, list[Spot]()
    for spot in turns:
        takes = run_mg(definition, spot) or 0.0
        if takes > left + _SLACK:
            break
        left -= takes
        offered.append(spot)
    if not offered:
        raise StudyFaults([_short(definition, turns[0], reserve, used_mg)])
    if len(offered) < len(turns):
        notices.append(
            f"The reserved {number(reserve)} mg{_after(used_mg)} reach for "
            f"{len(offered)} of {counted(wanted, 'run')}."
        )
    return offered, notices


def _after(used_mg: float) -> str:
    return f", less {number(round(used_mg, 6))} mg of earlier runs," if used_mg else ""


def _short(definition: Definition, spot: Spot, reserve: float, used_mg: float) -> Fault:
    takes = number(round(run_mg(definition, spot) or 0.0, 6))
    return Fault(
        file="study.toml",
        where="protein, reserved_mg",
        value=number(reserve),
        problem=f"{_after(used_mg).strip(', ') + ' ' if used_mg else ''}does not reach for one run;"
        " it takes",
        allowed=f"{takes} mg",
        hint="bed_ml, load and beside_mg in [columns] make it",
    )
