"""What verifying a study found, as a screen and as plain values."""

from __future__ import annotations

from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from rich.console import RenderableType

from muntin.record.faults import counted
from muntin.record.ledger import LEDGER
from muntin.report.text import sheet

if TYPE_CHECKING:
    from muntin.verify import Rechecked, Verified


def verify_facts(found: Verified, tolerance: float) -> dict[str, Any]:
    """Return what was found as plain values."""
    return {"command": "verify", "clean": found.clean, "tolerance": tolerance, **asdict(found)}


def verify_screen(found: Verified, tolerance: float) -> RenderableType:
    """Return the screen of `verify`."""
    ledger = f"{LEDGER}: {counted(found.lines, 'line')}." if found.lines else f"No {LEDGER} yet."
    said = [_advice_line(one, tolerance) for one in found.advice]
    verdict = "Clean: nothing differs."
    if not found.clean:
        verdict = f"NOT CLEAN: {counted(len(found.differs), 'difference')}."
    return sheet(
        found.title,
        [
            ("Ledger", [ledger]),
            ("Advice", said or ["No advice is on record; there is nothing to recompute."]),
            ("Differs", found.differs),
            ("Noted", found.notes),
            ("Verdict", [verdict]),
        ],
    )


def _advice_line(one: Rechecked, tolerance: float) -> str:
    if one.values is None:
        return f"{one.folder}: not recomputed."
    said = f"{one.folder}: {counted(one.values, 'value')} recomputed"
    if one.differs:
        return f"{said}; what differs is below."
    return f"{said}, all agree within {tolerance:g}."
