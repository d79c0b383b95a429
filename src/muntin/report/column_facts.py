"""Column runs as plain values: plans with their predictions, and what came of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import asdict
from pathlib import Path
from typing import Any

from muntin.confirmation.comparison import Compared, Comparison
from muntin.record.column_plan import ColumnPlan
from muntin.record.study import Study
from muntin.report.column_text import column_cautions
from muntin.report.facts import study_facts


def column_facts(
    study: Study,
    plans: Sequence[ColumnPlan],
    comparison: Comparison,
    written: Sequence[Path],
    notices: Sequence[str],
) -> dict[str, Any]:
    """Return the plans as on record and the comparison; differences in the response's unit."""
    return {
        "command": "confirm",
        "study": study_facts(study),
        "plans": [plan.model_dump() for plan in plans],
        "compared": [_compared(one) for one in comparison.compared],
        "shifts": [asdict(shift) for shift in comparison.shifts],
        "left_out": [{"run": run.run, "reason": _reason(run)} for run in comparison.left_out],
        "awaited": [run.run for run in comparison.awaited],
        "notices": list(notices),
        "cautions": list(column_cautions(study.definition)),
        "files": [str(path) for path in written],
    }


def _compared(one: Compared) -> Mapping[str, Any]:
    return {**asdict(one), "run": one.run.run, "place": one.run.place}


def _reason(run: Any) -> str:
    own = [f"{name}: {r.reason}" for name, r in run.readings.items() if r.reason]
    return "; ".join([*([run.excluded] if run.excluded else []), *own])
