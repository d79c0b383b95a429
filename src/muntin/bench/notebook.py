"""How a plan shows itself in a notebook."""

from __future__ import annotations

from typing import TYPE_CHECKING

from muntin.record.faults import counted
from muntin.record.notebook import card

if TYPE_CHECKING:
    from muntin.bench.plan import Plan

_FIRST = 12


def plan_card(plan: Plan) -> str:
    """Return the plan's counts, its first conditions and its forecast."""
    chosen = plan.wells[plan.wells["role"].isin(["test", "bridge", "reference"])]
    below = f"{counted(len(chosen), 'well')} to run and the forecast"
    if len(chosen) > _FIRST:
        below = f"the first {_FIRST} of {len(chosen)} wells to run (all in .wells) and the forecast"
    rows = [
        ("Wells", _roles(plan)),
        ("Aim", f"{plan.aim}, seed {plan.seed}"),
        ("Protein", "" if plan.protein_mg is None else f"{plan.protein_mg:.3g} mg"),
        ("Against the stop rule", f"{plan.ruling.word} ({plan.ruling.because})"),
        ("Notices", plan.notices),
        ("Below", below),
    ]
    return card(f"Plan of {plan.plate}", rows, chosen.head(_FIRST), plan.forecast)


def plan_line(plan: Plan) -> str:
    """Return a plan as it shows itself in a console, in a line."""
    return f"Plan({plan.plate!r}, {_roles(plan)}, aim {plan.aim}, seed {plan.seed})"


def _roles(plan: Plan) -> str:
    counts = plan.wells["role"].value_counts(sort=False)
    return ", ".join(f"{count} {role}" for role, count in counts.items())
