"""The verdict of a rehearsal, in plain sentences."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from muntin.record.faults import counted
from muntin.report.words import amount_text, joined, share_text

if TYPE_CHECKING:
    from muntin.rehearsal.rehearse import Rehearsal

# A fall of the wrongly called share below this is hardly one.
_HARDLY = 0.1
# Fewer series than these have no tenth one.
_TOLD = 10
# Chance that a difference is called clear where there is none.
_MISTAKEN = 0.05


def verdict(told: Rehearsal) -> tuple[str, ...]:
    """Return what to do about the plates, and how their rivals did."""
    own = told.to_stop.iloc[0]
    return (_own(own, told.after[told.after["design"] == own["design"]]), *_rivals(told))


def _own(own: pd.Series, after: pd.DataFrame) -> str:
    """What the plates chosen by muntin come to."""
    count = f"{own['reached']} of {own['series']} series reach the stop rule"
    planned = counted(int(own["planned_tests"]), "test well")
    if own["tests_most"] == 0:
        return "Stop: the stop rule is met already; no plate is needed."
    if np.isfinite(own["tests_most"]):
        fewer = own["tests_most"] < own["planned_tests"]
        half = f"half within {_spent(own, 'half')}, "
        sooner = half if own["tests_half"] < own["tests_most"] else ""
        first = "Go on with fewer" if fewer else "Go on"
        few = own["series"] < _TOLD
        doubt = "; so few series hardly tell nine in ten" if few else ""
        return f"{first}: {count}, {sooner}nine in ten within {_spent(own, 'most')}{doubt}."
    before, last = float(after["wrong"].iloc[0]), float(after["wrong"].iloc[-1])
    fall = f"what is called wrongly goes from {share_text(before)} to {share_text(last)}"
    if np.isfinite(own["tests_half"]):
        return (
            f"Go on, but do not count on stopping then: {count} with {planned}, half within "
            f"{_spent(own, 'half')}; {fall}."
        )
    if before - last < _HARDLY * before:
        return f"Stop, or ask otherwise: {count} with {planned}, and {fall}."
    return f"These plates are too few to stop after: {count} with {planned}; {fall}."


def _spent(own: pd.Series, share: str) -> str:
    """Return "12 test wells (1 plate, 7 mg)"."""
    parts = [counted(int(own[f"plates_{share}"]), "plate")]
    if np.isfinite(own[f"mg_{share}"]):
        parts.append(amount_text(own[f"mg_{share}"]))
    return f"{counted(int(own[f'tests_{share}']), 'test well')} ({', '.join(parts)})"


def _clear(rival: pd.Series) -> bool:
    """Whether a mean difference lies further from 0 than Student's t allows for."""
    from scipy.special import stdtrit

    if not np.isfinite(rival["se"]):
        return False
    allowed = stdtrit(rival["series"] - 1, 1.0 - _MISTAKEN / 2.0) * rival["se"]
    return bool(abs(rival["difference"]) > allowed)


def _rivals(told: Rehearsal) -> list[str]:
    """How much more of the range the rivals call wrongly in the end, truth by truth."""
    if told.against.empty:
        return []
    worse, better, alike = [], [], []
    for _, rival in told.against.iterrows():
        points = f"{rival['design']} ({100 * abs(rival['difference']):.1f} points)"
        if not _clear(rival):
            alike.append(str(rival["design"]))
        elif rival["difference"] > 0:
            worse.append(points)
        else:
            better.append(points)
    said = []
    if worse:
        said.append(f"more is called wrongly by {joined(worse)}")
    if better:
        said.append(
            f"less by {joined(better)}" if worse else f"less is called wrongly by {joined(better)}"
        )
    if alike:
        said.append(f"no clear difference to {joined(alike)}")
    return [f"With as many test wells: {'; '.join(said)}."]
