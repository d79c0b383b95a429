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
    roles = plan.wells["role"].value_counts(sort=False)
    chosen = plan.wells[plan.wells["role"].isin(["test", "bridge", "reference"])]
    below = f"{counted(len(chosen), 'well')} to run and the forecast"
    if len(chosen) > _FIRST:
        below = f"the first {_FIRST} of {len(chosen)} wells to run (all in .wells) and the forecast"
    rows = [
        ("Wells", ", ".join(f"{count} {role}" for role, count in roles.items())),
        ("Aim", f"{plan.aim}, seed {plan.seed}"),
        ("Protein", "" if plan.protein_mg is None else f"{plan.protein_mg:.3g} mg"),
        ("Against the stop rule", f"{plan.ruling.word} ({plan.ruling.because})"),
        ("Notices", plan.notices),
        ("Below", below),
    ]
    return card(f"Plan of {plan.plate}", rows, chosen.head(_FIRST), plan.forecast)
