"""Why each well is in the plan, in one sentence."""

from __future__ import annotations

from collections import Counter

import numpy as np
from numpy.typing import NDArray

from muntin.design.selection import Pick, Selection
from muntin.record.definition import Definition

Array = NDArray[np.float64]

_INSIDE = 0.9
_LEVEL = 0.98
_SURE = 0.95
_FAR = 0.01
_OPEN = 0.2


def reasons(
    definition: Definition, selection: Selection, p_mean: Array, p_now: Array, opening: bool
) -> list[str]:
    """One sentence for each pick; p_mean (n,) that the process mean passes, p_now as judged."""
    run = {r.values: r.wells for r in selection.run}
    seen: Counter[int] = Counter()
    said = []
    for pick, p, now in zip(selection.picks, p_mean.tolist(), p_now.tolist(), strict=True):
        values = tuple(selection.candidates.iloc[pick.candidate])
        before = seen[pick.candidate]
        seen[pick.candidate] += 1
        if before and pick.role == "test":
            said.append(f"well {before + 1} of this condition: averages the noise")
        elif opening:
            said.append("opening plate, spread to find where the target is met")
        else:
            first = definition.factors[0]
            at = first.named(first.shown(values[0]))
            said.append(_reason(pick, p, now, at, _place(run.get(values, ()))))
    return said


def _reason(pick: Pick, p: float, now: float, at: str, place: str) -> str:
    """Why one condition was picked; at: its first factor, place: where it was run last, or ""."""
    if pick.role == "bridge":
        sure = "known" if max(p, 1.0 - p) >= _SURE else "likely"
        return f"repeats {place}, a {sure} {'pass' if p >= 0.5 else 'fail'}: ties plates"
    again = f"repeats {place}: " if place else ""
    chance = f"{again}probability {now:.2f}"
    if pick.purpose == "best":
        return f"{chance}, the best condition or one that may beat it"
    if p >= _LEVEL and now >= _INSIDE:
        return f"{chance}, reads the new plate's own error where the target is met"
    if now <= _FAR:
        return f"{chance}, far outside the edge at {at}: bears on it from afar"
    return f"{chance}, {_where(now)} the edge at {at}"


def _where(now: float) -> str:
    """Where a condition of such a probability lies, as seen from the edge."""
    if now >= _INSIDE:
        return "inside"
    if now <= 1.0 - _INSIDE:
        return "outside"
    if abs(now - 0.5) <= _OPEN:
        return "on"
    return "just inside" if now > 0.5 else "just outside"


def _place(wells: tuple[tuple[str, str], ...]) -> str:
    return " ".join(wells[-1]) if wells else ""
