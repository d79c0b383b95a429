"""How far the readings of one well move together."""

from __future__ import annotations

from collections.abc import Sequence

from muntin.record.study import Study
from muntin.window.checks.check import Check
from muntin.window.residuals import Together


def readings_together(study: Study, every: Sequence[Together]) -> list[Check]:
    """One line for every two judged responses; told, never a failure."""
    labels = {r.name: r.label for r in study.definition.judged}
    return [
        Check("readings together", True, False, _sentence(t, labels[t.first], labels[t.second]))
        for t in every
        if t.first in labels and t.second in labels
    ]


def _sentence(t: Together, first: str, second: str) -> str:
    pair = f"{first} and {second}"
    if not t.told:
        wells = f"{t.wells} wells" if t.wells != 1 else "1 well"
        return (
            f"{pair}: {wells} with both readings cannot tell whether they move together; they are "
            "taken as independent."
        )
    how = "may move together or not"
    if t.low > 0.0 or t.high < 0.0:
        how = "move together" if t.rho > 0.0 else "move against each other"
    return f"{pair}: readings of one well {how} ({t.rho:.1f}, 95 % {t.low:.1f} to {t.high:.1f})."
